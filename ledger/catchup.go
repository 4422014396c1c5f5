package ledger

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"
)

// catchUp brings the state to the head of the database by reading the rows that changed after the position it
// stands at; from an empty state that is every current row. One snapshot, so that the tables agree with each
// other. The caller holds the write lock. Cost: the rows that changed, and the pairs of the entries read.
func (v *Volume) catchUp(ctx context.Context) error {
	tx, err := v.pool.BeginTx(ctx, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly})
	if err != nil {
		return err
	}
	defer tx.Rollback(context.WithoutCancel(ctx)) //nolint:errcheck // nothing to lose: read only
	var position, minted, groups int64
	if err := tx.QueryRow(ctx, `select position, minted, groups from head where volume_id = $1`, v.info.VolumeID).
		Scan(&position, &minted, &groups); err != nil {
		return err
	}
	s, from := v.state, v.state.position
	if position == from {
		return nil
	}
	news := &change{}
	if err := readPieces(ctx, tx, v.info.VolumeID, from, news); err != nil {
		return err
	}
	if err := readSegments(ctx, tx, v.info.VolumeID, from, news); err != nil {
		return err
	}
	pairs, last, err := v.readPairs(ctx, tx, from)
	if err != nil {
		return err
	}
	s.advance(news)
	for _, p := range pairs {
		s.join(p.joined)
		s.sever(p.cut)
	}
	s.position, s.minted, s.groups, s.last = position, minted, groups, last
	return nil
}

// joinedAndCut is what one entry did to pairs.
type joinedAndCut struct{ joined, cut edgeSet }

// readPairs reads the pairs of the entries after a position, in order, and when the last of them was posted. Nothing of the
// state changes until all of them are read, so that a lost connection leaves it as it was.
func (v *Volume) readPairs(ctx context.Context, tx pgx.Tx, from int64) (out []joinedAndCut, last time.Time, err error) {
	rows, err := tx.Query(ctx, `
		select posted_at, joined_contacts, joined_links, cut_contacts, cut_links
		  from entry where volume_id = $1 and position > $2 order by position`, v.info.VolumeID, from)
	if err != nil {
		return nil, last, err
	}
	var jc, jl, cc, cl []ID
	_, err = pgx.ForEachRow(rows, []any{&last, &jc, &jl, &cc, &cl}, func() error {
		joined, err := v.byOrdinal(Edges{Contacts: unflat(jc), Links: unflat(jl)})
		if err != nil {
			return err
		}
		cut, err := v.byOrdinal(Edges{Contacts: unflat(cc), Links: unflat(cl)})
		out = append(out, joinedAndCut{joined, cut})
		return err
	})
	return out, last.UTC(), err
}

// readPieces reads rows that ended after a position and began before it, and rows that are open now and began after
// it. What came and went in between leaves no trace.
func readPieces(ctx context.Context, tx pgx.Tx, volume int32, from int64, into *change) error {
	rows, err := tx.Query(ctx, `
		select lo, hi, grp, from_position, coalesce(to_position, 0) from piece
		 where volume_id = $1 and to_position > $2 and from_position <= $2
		union all
		select lo, hi, grp, from_position, 0 from piece
		 where volume_id = $1 and from_position > $2 and to_position is null`, volume, from)
	if err != nil {
		return err
	}
	var p piece
	_, err = pgx.ForEachRow(rows, []any{&p.lo, &p.hi, &p.group, &p.from, &p.to}, func() error {
		if p.to > 0 {
			into.closed = append(into.closed, p)
		} else {
			into.opened = append(into.opened, p)
		}
		return nil
	})
	return err
}

func readSegments(ctx context.Context, tx pgx.Tx, volume int32, from int64, into *change) error {
	// From the start every row counts; later only those that the entries since name.
	rows, err := tx.Query(ctx, segmentColumns+`
		 where volume_id = $1 and ((retired > $2 and born <= $2) or (born > $2 and retired is null))
		   and ($2 = 0 or segment_id in (
		       select id from entry e, unnest(e.before || e.after) id where e.volume_id = $1 and e.position > $2))`, volume, from)
	if err != nil {
		return err
	}
	defer rows.Close()
	for rows.Next() {
		s, err := scanSegment(rows)
		if err != nil {
			return err
		}
		if s.Retired > 0 {
			into.retired = append(into.retired, s)
		} else {
			into.born = append(into.born, s)
		}
	}
	return rows.Err()
}

// byOrdinal turns pairs of ids into pairs of ordinals.
func (v *Volume) byOrdinal(e Edges) (edgeSet, error) {
	var out edgeSet
	for _, side := range []struct {
		from [][2]ID
		to   *[][2]uint32
	}{{e.Contacts, &out.contacts}, {e.Links, &out.links}} {
		for _, p := range side.from {
			g, err := v.ordinals(p[:])
			if err != nil {
				return out, err
			}
			*side.to = append(*side.to, ordered(g[0], g[1]))
		}
	}
	return out, nil
}
