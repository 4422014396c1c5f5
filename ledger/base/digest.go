package base

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"hash"
	"math"
)

// The digest of a base is SHA-256 over, one after the other:
//
//   - the text "fettle base " and the layout version in decimal, and a line feed;
//   - SHA-256 of the JSON of voxel size, bounds, seams and gaps, as describeDigest writes it;
//   - for each section in the order of sectionNames, SHA-256 over its blocks by number: each block's length in 8 bytes,
//     then its content before compression;
//   - SHA-256 over the synapses, by pre ordinal, then post ordinal, then id: id, pre, post, x, y, z, the bits of the
//     confidence, length and bytes of the transmitter, each number in 8 bytes;
//   - SHA-256 over the nuclei by id, likewise: id, ordinal, x, y, z, the bits of the volume.
//
// All numbers are little-endian. The name is not part of it, nor the version of the compressor.
type digester struct {
	sections map[string]hash.Hash
	synapses hash.Hash
	nuclei   hash.Hash
	buf      []byte
}

// The sections of a base, as table base_block names them.
const (
	sectionIDs      = "ids"
	sectionGeometry = "geometry"
	sectionAccepted = "accepted"
	sectionRejected = "rejected"
	sectionSegments = "segments"
	sectionBoxes    = "boxes"
	sectionTruth    = "truth"
)

var sectionNames = []string{sectionIDs, sectionGeometry, sectionAccepted, sectionRejected, sectionSegments, sectionBoxes, sectionTruth}

func newDigester() *digester {
	d := &digester{sections: make(map[string]hash.Hash), synapses: sha256.New(), nuclei: sha256.New()}
	for _, name := range sectionNames {
		d.sections[name] = sha256.New()
	}
	return d
}

// block takes in the next block of a section.
func (d *digester) block(section string, content []byte) {
	h := d.sections[section]
	h.Write(binary.LittleEndian.AppendUint64(nil, uint64(len(content))))
	h.Write(content)
}

func (d *digester) numbers(values ...uint64) []byte {
	d.buf = d.buf[:0]
	for _, v := range values {
		d.buf = binary.LittleEndian.AppendUint64(d.buf, v)
	}
	return d.buf
}

func (d *digester) synapse(s *synapseRecord, transmitter string) {
	d.synapses.Write(append(d.numbers(s.id, uint64(s.pre), uint64(s.post), uint64(s.at[0]), uint64(s.at[1]), uint64(s.at[2]),
		math.Float64bits(s.confidence), uint64(len(transmitter))), transmitter...))
}

func (d *digester) nucleus(n *nucleusRecord) {
	d.nuclei.Write(d.numbers(n.id, uint64(n.at), uint64(n.point[0]), uint64(n.point[1]), uint64(n.point[2]), math.Float64bits(n.volume)))
}

// sum is the digest of a base with this description.
func (d *digester) sum(info *Info) [32]byte {
	h := sha256.New()
	h.Write([]byte("fettle base 1\n"))
	about := describeDigest(info)
	h.Write(about[:])
	for _, name := range sectionNames {
		h.Write(d.sections[name].Sum(nil))
	}
	h.Write(d.synapses.Sum(nil))
	h.Write(d.nuclei.Sum(nil))
	return [32]byte(h.Sum(nil))
}

func describeDigest(info *Info) [32]byte {
	b, err := json.Marshal(struct {
		VoxelNM [3]float64
		Bounds  Bounds
		Seams   []Seam
		Gaps    []Gap
	}{info.VoxelNM, info.Bounds, info.Seams, info.Gaps})
	if err != nil {
		panic(err) // finite numbers, checked when they were read
	}
	return sha256.Sum256(b)
}
