package base

import (
	"context"

	"fettle.example/fettle/internal/pg"
)

// Totals sums up supervoxels. Whole base segments are looked up; of others the geometry is read and synapses and
// nuclei are counted.
func (b *Base) Totals(ctx context.Context, db pg.DB, ranges []Range) (Totals, error) {
	var t Totals
	if _, err := choose(ranges, b.info.Supervoxels); err != nil {
		return t, err
	}
	var parts []Range
	for _, r := range ranges {
		for lo := r.Lo; lo < r.Hi; {
			s := &b.segments[b.SegmentNumber(lo)]
			hi := min(r.Hi, s.lo+s.size)
			if lo == s.lo && hi == s.lo+s.size {
				t.include(s.totals())
			} else if n := len(parts); n > 0 && parts[n-1].Hi == lo {
				parts[n-1].Hi = hi
			} else {
				parts = append(parts, Range{lo, hi})
			}
			lo = hi
		}
	}
	if len(parts) == 0 {
		return t, nil
	}
	rest, err := b.count(ctx, db, parts)
	t.include(rest)
	return t, err
}

// include adds what other supervoxels hold.
func (t *Totals) include(o Totals) {
	if o.Supervoxels == 0 {
		return
	}
	if t.Supervoxels == 0 {
		*t = o
		return
	}
	t.Supervoxels += o.Supervoxels
	t.Voxels += o.Voxels
	t.SynapsesIn += o.SynapsesIn
	t.SynapsesOut += o.SynapsesOut
	t.Nuclei += o.Nuclei
	for i := range t.Min {
		t.Min[i], t.Max[i] = min(t.Min[i], o.Min[i]), max(t.Max[i], o.Max[i])
	}
}

func (b *Base) count(ctx context.Context, db pg.DB, ranges []Range) (Totals, error) {
	var t Totals
	c, err := choose(ranges, b.info.Supervoxels)
	if err != nil {
		return t, err
	}
	err = b.load(ctx, db, c.blocks(), []string{sectionGeometry}, func(blk *block) error {
		c.within(blk.lo, blk.geometry.len(), func(_, k int) {
			p := blk.geometry.point(k)
			t.include(Totals{Supervoxels: 1, Voxels: blk.geometry.voxels[k], Min: p, Max: p})
		})
		return nil
	})
	if err != nil {
		return t, err
	}
	lo, hi := c.bounds()
	err = db.QueryRow(ctx, `
		select (select count(*) from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		          join base_synapse s on s.volume_id = $1 and s.post >= r.lo and s.post < r.hi),
		       (select count(*) from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		          join base_synapse s on s.volume_id = $1 and s.pre >= r.lo and s.pre < r.hi),
		       (select count(*) from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		          join base_nucleus n on n.volume_id = $1 and n.supervoxel >= r.lo and n.supervoxel < r.hi)`,
		b.info.VolumeID, lo, hi).Scan(&t.SynapsesIn, &t.SynapsesOut, &t.Nuclei)
	return t, err
}
