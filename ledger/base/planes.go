package base

import (
	"errors"
	"fmt"
	"sync"

	"github.com/klauspost/compress/zstd"
)

// A column of numbers is stored as byte planes: all lowest bytes, then all second bytes, and so on, as many as the
// largest number needs. Neighbouring bytes are then alike, which zstd can use: a fifth smaller than varints for
// coordinates.

var errDamaged = errors.New("base: a stored block is damaged")

// appendPlanes stores a column: the number of planes, then the planes.
func appendPlanes(dst []byte, col []uint64) []byte {
	var all uint64
	for _, v := range col {
		all |= v
	}
	planes := 0
	for ; all != 0; all >>= 8 {
		planes++
	}
	dst = append(dst, byte(planes))
	for p := range planes {
		shift := 8 * p
		for _, v := range col {
			dst = append(dst, byte(v>>shift))
		}
	}
	return dst
}

// readPlanes reads a column of n numbers into out, which it grows, and returns what follows.
func readPlanes(src []byte, n int, out []uint64) (col []uint64, rest []byte, err error) {
	if len(src) == 0 || src[0] > 8 || len(src)-1 < int(src[0])*n {
		return nil, nil, errDamaged
	}
	planes := int(src[0])
	src = src[1:]
	if cap(out) < n {
		out = make([]uint64, n)
	}
	out = out[:n]
	clear(out)
	for p := range planes {
		shift := 8 * p
		for i, b := range src[:n] {
			out[i] |= uint64(b) << shift
		}
		src = src[n:]
	}
	return out, src, nil
}

// zigzag gives small numbers of either sign small codes: 0, -1, 1, -2 … become 0, 1, 2, 3 ….
func zigzag(v int64) uint64 { return uint64(v)<<1 ^ uint64(v>>63) }

func unzigzag(u uint64) int64 { return int64(u>>1) ^ -int64(u&1) }

// How the bytes of a block are stored: its first byte.
const (
	storedRaw  = 0
	storedZstd = 1
)

// largestBlock bounds what a damaged block can make us hold.
const largestBlock = 1 << 30

var zstdWriter = sync.OnceValue(func() *zstd.Encoder {
	e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedDefault), zstd.WithEncoderCRC(false))
	if err != nil {
		panic(err)
	}
	return e
})

var zstdReader = sync.OnceValue(func() *zstd.Decoder {
	d, err := zstd.NewReader(nil, zstd.WithDecoderMaxMemory(largestBlock))
	if err != nil {
		panic(err)
	}
	return d
})

// seal packs a block's content for storage: compressed when that makes it smaller.
func seal(content []byte, compress bool) []byte {
	if compress {
		packed := zstdWriter().EncodeAll(content, []byte{storedZstd})
		if len(packed) <= len(content) {
			return packed
		}
	}
	return append([]byte{storedRaw}, content...)
}

// unseal gives a block's content back.
func unseal(data []byte) ([]byte, error) {
	if len(data) == 0 {
		return nil, errDamaged
	}
	switch data[0] {
	case storedRaw:
		return data[1:], nil
	case storedZstd:
		content, err := zstdReader().DecodeAll(data[1:], nil)
		if err != nil {
			return nil, fmt.Errorf("%w: %w", errDamaged, err)
		}
		return content, nil
	}
	return nil, errDamaged
}
