package ledger

import (
	"context"
	"fmt"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// Reconciliation is what [Volume.Reconcile] found.
type Reconciliation struct {
	Position    int64 // of the snapshot that was examined
	Entries     int64
	Supervoxels int64
	Segments    int64    // current ones
	Differences []string // what the tables say and should not; at most differencesKept
	More        int      // differences beyond those
}

// Clean says that there is no difference.
func (r *Reconciliation) Clean() bool { return len(r.Differences) == 0 }

const differencesKept = 100

func (r *Reconciliation) differ(format string, args ...any) {
	if len(r.Differences) == differencesKept {
		r.More++
		return
	}
	r.Differences = append(r.Differences, fmt.Sprintf(format, args...))
}

// Reconcile recomputes every segment from the base and the entries alone, with a plain union-find that shares nothing
// with the code that posts, and compares it with what the tables say: which supervoxels are together, every current
// segment's totals, how many supervoxels each past segment held, every entry's bytes, hash, position and cost. It reads one
// snapshot and may run beside posting. O(supervoxels + contacts + entries); memory some 80 bytes a supervoxel.
func (v *Volume) Reconcile(ctx context.Context, progress func(done, total int64)) (*Reconciliation, error) {
	tx, err := v.pool.BeginTx(ctx, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly})
	if err != nil {
		return nil, err
	}
	defer tx.Rollback(context.WithoutCancel(ctx)) //nolint:errcheck // read only
	r := &Reconciliation{Supervoxels: v.info.Supervoxels}
	if err := tx.QueryRow(ctx, `select position from head where volume_id = $1`, v.info.VolumeID).Scan(&r.Position); err != nil {
		return nil, err
	}
	told, err := v.replay(ctx, tx, r)
	if err != nil {
		return nil, err
	}
	truth, err := v.recompute(ctx, tx, told, progress)
	if err != nil {
		return nil, err
	}
	told.checkCosts(r)
	rows, err := readTables(ctx, tx, v.info.VolumeID)
	if err != nil {
		return nil, err
	}
	rows.checkHistory(v.base, r)
	v.compare(truth, rows, r)
	return r, nil
}

// recomputed is who is together, from contacts alone.
type recomputed struct {
	sets   *cut.Sets
	totals []Totals // by ordinal; after summing, of the set whose root it is
}

// examined is how many supervoxels are loaded at once.
const examined = 1 << 16

// recompute unites what accepted contacts and live links hold together.
func (v *Volume) recompute(ctx context.Context, tx pgx.Tx, told *told, progress func(done, total int64)) (*recomputed, error) {
	n := uint32(v.info.Supervoxels)
	t := &recomputed{sets: cut.NewSets(int(n)), totals: make([]Totals, n)}
	for lo := uint32(0); lo < n; lo += examined {
		hi := min(n, lo+examined)
		w, err := v.base.View(ctx, tx, []base.Range{{Lo: lo, Hi: hi}})
		if err != nil {
			return nil, err
		}
		for _, c := range w.Contacts {
			if told.accepts(ordered(w.Ordinals[c.A], w.Ordinals[c.B]), capacity(c)) {
				t.sets.Union(int32(w.Ordinals[c.A]), int32(w.Ordinals[c.B]))
			}
		}
		for _, o := range w.Outside {
			c := base.Contact{Affinity: o.Affinity, Assumed: o.Assumed}
			if (o.Accepted || o.Assumed) && told.accepts(ordered(w.Ordinals[o.At], o.Other), capacity(c)) {
				t.sets.Union(int32(w.Ordinals[o.At]), int32(o.Other))
			}
		}
		t.count(w)
		if progress != nil {
			progress(int64(hi), int64(n))
		}
	}
	for l := range told.links {
		t.sets.Union(int32(l[0]), int32(l[1]))
	}
	for g := range n {
		if root := t.sets.Find(int32(g)); root != int32(g) {
			t.totals[root] = plus(t.totals[root], t.totals[g])
		}
	}
	return t, nil
}

// count notes what each supervoxel of a view holds.
func (t *recomputed) count(w *base.View) {
	for i, g := range w.Ordinals {
		t.totals[g] = Totals{Supervoxels: 1, Voxels: w.Voxels[i], Min: w.Points[i], Max: w.Points[i]}
	}
	for _, s := range w.Synapses {
		if s.Out {
			t.totals[w.Ordinals[s.At]].SynapsesOut++
		} else {
			t.totals[w.Ordinals[s.At]].SynapsesIn++
		}
	}
	for _, c := range w.Nuclei {
		t.totals[w.Ordinals[c.At]].Nuclei++
	}
}

// compare holds the tables' groups and segments against the recomputed sets.
func (v *Volume) compare(t *recomputed, rows *tables, r *Reconciliation) {
	setOf := make(map[int64]int32) // group -> root
	groupOf := make(map[int32]int64)
	rows.eachCurrent(v.base, func(g uint32, group int64) {
		root := t.sets.Find(int32(g))
		if was, ok := setOf[group]; ok && was != root {
			r.differ("ordinals %d and %d are in group %d, and nothing holds them together", was, g, group)
		}
		if was, ok := groupOf[root]; ok && was != group {
			r.differ("ordinals %d and %d hang together, and are in groups %d and %d", root, g, was, group)
		}
		setOf[group], groupOf[root] = root, group
	})
	r.Segments = int64(len(setOf))
	for group, root := range setOf {
		seg, ok := rows.current[group]
		if !ok {
			if group >= int64(v.base.SegmentCount()) {
				r.differ("group %d has no segment", group)
				continue
			}
			b := v.base.Segment(int(group))
			if rows.ended[b.ID] {
				r.differ("segment %s is retired, and its supervoxels are still in group %d", b.ID, group)
			}
			seg = Segment{ID: b.ID, Totals: b.Totals}
		}
		if seg.Totals != t.totals[root] {
			r.differ("segment %s holds %+v, and its row says %+v", seg.ID, t.totals[root], seg.Totals)
		}
	}
	for group, seg := range rows.current {
		if _, ok := setOf[group]; !ok {
			r.differ("segment %s is current, and group %d holds nothing", seg.ID, group)
		}
	}
}
