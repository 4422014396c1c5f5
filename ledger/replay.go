package ledger

import (
	"bytes"
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger/cut"
	"fettle.example/fettle/ledger/proof"
)

// told is what the entries say, one after the other, and what is needed to check them against the base.
type told struct {
	cuts       map[[2]uint32]bool  // every accepted contact that was ever cut: whether it is cut now
	links      map[[2]uint32]int   // live links
	capacities map[[2]uint32]int64 // of the contacts in cuts, as the base has them
	splits     []splitCost
}

// splitCost is a split's cost as posted, and what it cut.
type splitCost struct {
	position, cost int64
	cut            edgeSet
}

// replay folds the entries from the first to the last, and checks each by itself: its place in the order, its bytes, that
// what it joined was apart and what it cut was there.
func (v *Volume) replay(ctx context.Context, tx pgx.Tx, r *Reconciliation) (*told, error) {
	t := &told{cuts: make(map[[2]uint32]bool), links: make(map[[2]uint32]int), capacities: make(map[[2]uint32]int64)}
	rows, err := tx.Query(ctx, entryColumns+` where e.volume_id = $1 and position <= $2 order by position`, v.info.VolumeID, r.Position)
	if err != nil {
		return nil, err
	}
	defer rows.Close()
	var last time.Time
	for rows.Next() {
		e, err := scanEntry(rows)
		if err != nil {
			return nil, err
		}
		r.Entries++
		if e.Position != r.Entries {
			r.differ("position %d follows position %d", e.Position, r.Entries-1)
		}
		if e.At.Before(last) {
			r.differ("entry %d is older than the one before it", e.Position)
		}
		last = e.At
		v.checkBytes(e, r)
		if err := v.fold(e, t, r); err != nil {
			return nil, err
		}
	}
	if r.Entries != r.Position {
		r.differ("the head stands at position %d, and there are %d entries", r.Position, r.Entries)
	}
	return t, rows.Err()
}

// checkBytes holds the bytes that were hashed against the entry's columns and its leaf hash.
func (v *Volume) checkBytes(e Entry, r *Reconciliation) {
	if proof.LeafHash(e.Content) != e.Leaf {
		r.differ("entry %d: the leaf hash is not that of its bytes", e.Position)
	}
	again := e
	if err := again.seal(v.digest); err != nil || !bytes.Equal(again.Content, e.Content) {
		r.differ("entry %d: its columns and its bytes say different things", e.Position)
	}
}

func (v *Volume) fold(e Entry, t *told, r *Reconciliation) error {
	joined, err := v.byOrdinal(e.Joined)
	if err != nil {
		return err
	}
	gone, err := v.byOrdinal(e.Cut)
	if err != nil {
		return err
	}
	for _, c := range joined.contacts {
		if !t.cuts[c] {
			r.differ("entry %d joins contact %v, which was accepted already", e.Position, c)
		}
		t.cuts[c] = false
	}
	for _, c := range gone.contacts {
		if t.cuts[c] {
			r.differ("entry %d cuts contact %v, which was cut already", e.Position, c)
		}
		t.cuts[c] = true
	}
	for _, l := range joined.links {
		t.links[l]++
	}
	for _, l := range gone.links {
		if t.links[l]--; t.links[l] < 0 {
			r.differ("entry %d cuts link %v, which was not there", e.Position, l)
		}
		if t.links[l] <= 0 {
			delete(t.links, l)
		}
	}
	if e.Kind == KindSplit {
		t.splits = append(t.splits, splitCost{e.Position, e.Cost, gone})
	}
	return nil
}

// accepts says whether an accepted contact of the base still is, and notes its capacity for checkCosts.
func (t *told) accepts(pair [2]uint32, capacity int64) bool {
	cut, ever := t.cuts[pair]
	if ever {
		t.capacities[pair] = capacity
	}
	return !cut
}

// checkCosts adds up what each split cut: a minimum cut's capacity equals the maximum flow, which the entry stored.
func (t *told) checkCosts(r *Reconciliation) {
	for _, s := range t.splits {
		sum := cut.LinkCapacity * int64(len(s.cut.links))
		for _, c := range s.cut.contacts {
			capacity, ok := t.capacities[c]
			if !ok {
				r.differ("entry %d cuts %v, which is no accepted contact", s.position, c)
			}
			sum += capacity
		}
		if sum != s.cost {
			r.differ("entry %d: what it cut costs %d, and it says %d", s.position, sum, s.cost)
		}
	}
	for c := range t.cuts {
		if _, ok := t.capacities[c]; !ok {
			r.differ("contact %v was cut or joined, and the base has no such accepted contact", c)
		}
	}
}
