package base

import (
	"context"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"sort"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Base is an open volume as it was delivered. It is immutable and safe for concurrent use.
//
// Memory: 13.5 bytes a supervoxel for ids and their index, 84 a base segment, and a cache of decoded blocks.
type Base struct {
	info     Info
	ids      []uint64 // by ordinal
	index    *idIndex // of ids
	segments []segmentRecord
	starts   []uint32 // first ordinals of the segments, apart, so that a search stays in the processor's cache
	byID     *idIndex // of segments
	boxes    []box    // by block
	cache    *cache
}

// Open reads a volume's description, ids and base segments. O(supervoxels), about a second for ten million.
func Open(ctx context.Context, db pg.DB, volumeID int32) (*Base, error) {
	b := &Base{cache: newCache(cacheBytes)}
	if err := b.readVolume(ctx, db, volumeID); err != nil {
		return nil, err
	}
	b.ids = make([]uint64, 0, b.info.Supervoxels)
	err := b.eachBlock(ctx, db, sectionIDs, func(number int, content []byte) error {
		ids, rest, err := readIDs(content, b.blockLen(number))
		if err != nil || len(rest) > 0 {
			return errDamaged
		}
		b.ids = append(b.ids, ids...)
		return nil
	})
	if err != nil {
		return nil, err
	}
	if err := b.readSegments(ctx, db); err != nil {
		return nil, err
	}
	err = b.eachBlock(ctx, db, sectionBoxes, func(_ int, content []byte) (err error) {
		b.boxes, err = readBoxes(content, b.blocks())
		return err
	})
	if err != nil {
		return nil, err
	}
	if int64(len(b.ids)) != b.info.Supervoxels || int64(len(b.segments)) != b.info.Segments || len(b.boxes) != b.blocks() {
		return nil, fmt.Errorf("volume %s: %w", b.info.Name, errDamaged)
	}
	b.index = newIDIndex(b.ids)
	return b, nil
}

func (b *Base) readVolume(ctx context.Context, db pg.DB, id int32) error {
	i := &b.info
	var voxel, bounds []float64
	var seams, gaps, digest []byte
	err := db.QueryRow(ctx, `
		select volume_id, name, voxel_nm, bounds_nm, seams, gaps, supervoxels, segments, contacts, rejected,
		       assumed, synapses, nuclei, truth, has_truth, digest, mint_from, layout
		  from volume where volume_id = $1`, id).
		Scan(&i.VolumeID, &i.Name, &voxel, &bounds, &seams, &gaps, &i.Supervoxels, &i.Segments, &i.Contacts, &i.Rejected,
			&i.Assumed, &i.Synapses, &i.Nuclei, &i.Truth, &i.HasTruth, &digest, &i.MintFrom, &i.Layout)
	if errors.Is(err, pgx.ErrNoRows) {
		return fault.Newf(fault.NotFound, "volume-unknown", "there is no volume number %d", id)
	}
	if err != nil {
		return err
	}
	if i.Layout != layoutVersion {
		return fmt.Errorf("base: volume %s has layout %d, and this program reads %d", i.Name, i.Layout, layoutVersion)
	}
	i.VoxelNM, i.Bounds = [3]float64(voxel), Bounds{Point(bounds[:3]), Point(bounds[3:])}
	i.Digest = hex.EncodeToString(digest)
	if err := json.Unmarshal(seams, &i.Seams); err != nil {
		return err
	}
	return json.Unmarshal(gaps, &i.Gaps)
}

func (b *Base) readSegments(ctx context.Context, db pg.DB) error {
	lo := uint32(0)
	err := b.eachBlock(ctx, db, sectionSegments, func(number int, content []byte) error {
		n := min(blockSize, int(b.info.Segments)-number*blockSize)
		if n < 0 {
			return errDamaged
		}
		segs, err := readSegments(content, n, lo)
		if err != nil {
			return err
		}
		for i := range segs {
			lo += segs[i].size
		}
		b.segments = append(b.segments, segs...)
		return nil
	})
	ids := make([]uint64, len(b.segments))
	b.starts = make([]uint32, len(b.segments))
	for i := range b.segments {
		ids[i], b.starts[i] = b.segments[i].id, b.segments[i].lo
	}
	b.byID = newIDIndex(ids)
	if err == nil && int64(lo) != b.info.Supervoxels {
		err = fmt.Errorf("volume %s, section %s: %w", b.info.Name, sectionSegments, errDamaged)
	}
	return err
}

// eachBlock reads a section whole, block by block.
func (b *Base) eachBlock(ctx context.Context, db pg.DB, section string, fn func(number int, content []byte) error) error {
	rows, err := db.Query(ctx, `
		select number, data from base_block where volume_id = $1 and section = $2 order by number`, b.info.VolumeID, section)
	if err != nil {
		return err
	}
	var number int
	var data []byte
	next := 0
	_, err = pgx.ForEachRow(rows, []any{&number, &data}, func() error {
		content, err := unseal(data)
		if err == nil && number != next {
			err = errDamaged
		}
		if err == nil {
			err = fn(number, content)
		}
		if err != nil {
			return fmt.Errorf("volume %s, section %s, block %d: %w", b.info.Name, section, number, err)
		}
		next++
		return nil
	})
	return err
}

// Info describes the volume.
func (b *Base) Info() Info { return b.info }

// blocks is how many blocks of ordinals there are.
func (b *Base) blocks() int { return int((b.info.Supervoxels + blockSize - 1) / blockSize) }

// blockLen is how many supervoxels a block holds: all but the last are full.
func (b *Base) blockLen(number int) int {
	return int(max(0, min(blockSize, b.info.Supervoxels-int64(number)*blockSize)))
}

// Ordinal finds a supervoxel. O(1).
func (b *Base) Ordinal(id ID) (uint32, bool) { return b.index.find(uint64(id)) }

// SupervoxelIDs gives the ids of ordinals, in the order asked.
func (b *Base) SupervoxelIDs(_ context.Context, _ pg.DB, ords []uint32) ([]ID, error) {
	ids := make([]ID, len(ords))
	for i, g := range ords {
		if int64(g) >= b.info.Supervoxels {
			return nil, fmt.Errorf("base: volume %s has no ordinal %d", b.info.Name, g)
		}
		ids[i] = ID(b.ids[g])
	}
	return ids, nil
}

// SegmentCount is the number of base segments.
func (b *Base) SegmentCount() int { return len(b.segments) }

// Segment is the n-th base segment; they are numbered from 0 in the order of their ordinals.
func (b *Base) Segment(n int) Segment {
	s := &b.segments[n]
	return Segment{ID: ID(s.id), Lo: s.lo, Hi: s.lo + s.size, Totals: s.totals(), Assumed: int(s.assumed)}
}

// SegmentID is the id of a base segment, for those who need no more of it.
func (b *Base) SegmentID(n int) ID { return ID(b.segments[n].id) }

// SegmentNumber is the number of the base segment that holds an ordinal. O(log segments).
func (b *Base) SegmentNumber(g uint32) int {
	return sort.Search(len(b.starts), func(n int) bool { return b.starts[n] > g }) - 1
}

// FindSegment is the number of a base segment. O(1).
func (b *Base) FindSegment(id ID) (n int, ok bool) {
	at, ok := b.byID.find(uint64(id))
	return int(at), ok
}

// Truth gives what was delivered for scoring: true neurons and sizes in voxels by ordinal, and which supervoxels have
// one. It reads the whole volume.
func (b *Base) Truth(ctx context.Context, db pg.DB) (truth []ID, has []bool, voxels []int64, err error) {
	if !b.info.HasTruth {
		return nil, nil, nil, fault.Newf(fault.NotFound, "truth-absent", "volume %s was delivered without truth", b.info.Name).
			WithNext("scoring needs the table truth in the delivery")
	}
	n := int(b.info.Supervoxels)
	truth, has, voxels = make([]ID, 0, n), make([]bool, 0, n), make([]int64, 0, n)
	err = b.eachBlock(ctx, db, sectionTruth, func(number int, content []byte) error {
		t, err := readTruths(content, b.blockLen(number))
		if err != nil {
			return err
		}
		has = append(has, t.has...)
		for _, id := range t.neuron {
			truth = append(truth, ID(id))
		}
		return nil
	})
	if err != nil {
		return nil, nil, nil, err
	}
	err = b.eachBlock(ctx, db, sectionGeometry, func(number int, content []byte) error {
		g, err := readGeometry(content, b.blockLen(number))
		if err == nil {
			voxels = append(voxels, g.voxels...)
		}
		return err
	})
	if err == nil && (len(truth) != n || len(voxels) != n) {
		err = errDamaged
	}
	return truth, has, voxels, err
}
