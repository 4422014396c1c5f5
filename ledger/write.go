package ledger

import (
	"context"
	"strconv"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
)

// write stores a group of changes and its companions in one transaction and one round trip: a pipeline without an
// explicit begin is a transaction of its own. The head's row is moved first, by compare and set, and stays locked
// until the commit, so that a second process waits and then finds that it has something to read.
func (v *Volume) write(ctx context.Context, members []*waiting, changes []*change) error {
	first, last := changes[0].entry.Position, changes[len(changes)-1].entry.Position
	var b pgx.Batch
	b.Queue(`select ledger_advance($1, $2, $3, $4, $5)`, v.info.VolumeID, first-1, last, v.state.minted, v.state.groups)
	queueEntries(&b, v.info.VolumeID, changes)
	queuePieces(&b, v.info.VolumeID, changes)
	queueSegments(&b, v.info.VolumeID, changes)
	for i, w := range members {
		for _, c := range w.companions {
			b.Queue(c.SQL, c.Args(changes[i].entry.Position)...)
		}
	}
	b.Queue(`select pg_notify($1, $2)`, Channel, strconv.Itoa(int(v.info.VolumeID))+" "+itoa(last))
	return v.pool.SendBatch(ctx, &b).Close()
}

func queueEntries(b *pgx.Batch, volume int32, changes []*change) {
	n := len(changes)
	position, reverses, cost := make([]int64, n), make([]*int64, n), make([]*int64, n)
	id, task := make([]uuid.UUID, n), make([]*uuid.UUID, n)
	kind, person, agent, reason := make([]string, n), make([]string, n), make([]*string, n), make([]string, n)
	at := make([]time.Time, n)
	lists := make([][]string, 6)
	content, leaf := make([][]byte, n), make([][]byte, n)
	for i, c := range changes {
		e := &c.entry
		position[i], id[i], task[i], kind[i], person[i], reason[i], at[i] = e.Position, e.ID, e.Task, e.Kind, e.Person, e.Reason, e.At
		if e.Agent != "" {
			agent[i] = &e.Agent
		}
		if e.Kind == KindReversal {
			reverses[i] = &e.Reverses
		}
		if e.Kind == KindSplit {
			cost[i] = &e.Cost
		}
		for k, ids := range [][]ID{e.Before, e.After, flat(e.Joined.Contacts), flat(e.Joined.Links), flat(e.Cut.Contacts), flat(e.Cut.Links)} {
			lists[k] = append(lists[k], literal(ids))
		}
		content[i], leaf[i] = e.Content, e.Leaf[:]
	}
	// Arrays of unlike lengths cannot travel as one array of arrays, so each goes as its text.
	b.Queue(`
		insert into entry (volume_id, position, entry_id, kind, person, agent, posted_at, task_id, reason, reverses,
		                   before, after, joined_contacts, joined_links, cut_contacts, cut_links, cost, content, leaf_hash)
		select $1, position, entry_id, kind, person, agent, posted_at, task_id, reason, reverses, b::bigint[], a::bigint[],
		       jc::bigint[], jl::bigint[], cc::bigint[], cl::bigint[], cost, content, leaf
		  from unnest($2::bigint[], $3::uuid[], $4::text[], $5::text[], $6::text[], $7::timestamptz[], $8::uuid[], $9::text[],
		              $10::bigint[], $11::text[], $12::text[], $13::text[], $14::text[], $15::text[], $16::text[], $17::bigint[],
		              $18::bytea[], $19::bytea[])
		       u (position, entry_id, kind, person, agent, posted_at, task_id, reason, reverses, b, a, jc, jl, cc, cl, cost, content, leaf)`,
		volume, position, id, kind, person, agent, at, task, reason, reverses,
		lists[0], lists[1], lists[2], lists[3], lists[4], lists[5], cost, content, leaf)
}

// literal writes ids as a PostgreSQL array of bigint.
func literal(ids []ID) string {
	buf := make([]byte, 0, 2+20*len(ids))
	buf = append(buf, '{')
	for i, id := range ids {
		if i > 0 {
			buf = append(buf, ',')
		}
		buf = strconv.AppendInt(buf, int64(id), 10)
	}
	return string(append(buf, '}'))
}

// queuePieces closes rows that were there before the group, then inserts the new ones, already closed if a later
// member of the group closed them.
func queuePieces(b *pgx.Batch, volume int32, changes []*change) {
	type key struct {
		lo   uint32
		from int64
	}
	var fresh []*piece
	byKey := make(map[key]*piece)
	var lo, from, to []int64
	for _, c := range changes {
		for _, p := range c.closed {
			if f, ok := byKey[key{p.lo, p.from}]; ok {
				f.to = p.to
				continue
			}
			lo, from, to = append(lo, int64(p.lo)), append(from, p.from), append(to, p.to)
		}
		for _, p := range c.opened {
			f := p
			fresh = append(fresh, &f)
			byKey[key{p.lo, p.from}] = &f
		}
	}
	if len(lo) > 0 {
		b.Queue(`select ledger_close($1, $2, $3, $4)`, volume, lo, from, to)
	}
	if len(fresh) == 0 {
		return
	}
	n := len(fresh)
	los, his, groups, since, until := make([]int64, n), make([]int64, n), make([]int64, n), make([]int64, n), make([]*int64, n)
	for i, p := range fresh {
		los[i], his[i], groups[i], since[i] = int64(p.lo), int64(p.hi), p.group, p.from
		if p.to > 0 {
			until[i] = &p.to
		}
	}
	b.Queue(`
		insert into piece (volume_id, lo, hi, grp, from_position, to_position)
		select $1, * from unnest($2::bigint[], $3::bigint[], $4::bigint[], $5::bigint[], $6::bigint[])`,
		volume, los, his, groups, since, until)
}

// queueSegments retires rows that were there before the group, then inserts those it made, and those of delivered
// segments that it touched for the first time.
func queueSegments(b *pgx.Batch, volume int32, changes []*change) {
	var fresh []*Segment
	byID := make(map[ID]*Segment)
	var ids []ID
	var retired []int64
	for _, c := range changes {
		for _, s := range c.retired {
			switch f, ok := byID[s.ID]; {
			case ok:
				f.Retired = s.Retired
			case s.Born == 0:
				f := s
				fresh = append(fresh, &f)
			default:
				ids, retired = append(ids, s.ID), append(retired, s.Retired)
			}
		}
		for _, s := range c.born {
			f := s
			fresh = append(fresh, &f)
			byID[s.ID] = &f
		}
	}
	if len(ids) > 0 {
		b.Queue(`select ledger_retire($1, $2, $3)`, volume, ids, retired)
	}
	n := len(fresh)
	numbers := make([][]int64, 7) // group, born, supervoxels, voxels, in, out, nuclei
	id, ended, bounds := make([]ID, n), make([]*int64, n), make([]string, n)
	for i, s := range fresh {
		id[i] = s.ID
		if s.Retired > 0 {
			ended[i] = &s.Retired
		}
		for k, x := range []int64{s.group, s.Born, s.Supervoxels, s.Voxels, s.SynapsesIn, s.SynapsesOut, s.Nuclei} {
			numbers[k] = append(numbers[k], x)
		}
		bounds[i] = literal([]ID{nm(s.Min[0]), nm(s.Min[1]), nm(s.Min[2]), nm(s.Max[0]), nm(s.Max[1]), nm(s.Max[2])})
	}
	b.Queue(`
		insert into segment (volume_id, segment_id, grp, born, retired, supervoxels, voxels, synapses_in, synapses_out, nuclei, bounds_nm)
		select $1, id, grp, born, retired, supervoxels, voxels, syn_in, syn_out, nuclei, bounds::bigint[]
		  from unnest($2::bigint[], $3::bigint[], $4::bigint[], $5::bigint[], $6::bigint[], $7::bigint[], $8::bigint[], $9::bigint[],
		              $10::bigint[], $11::text[])
		       u (id, grp, born, retired, supervoxels, voxels, syn_in, syn_out, nuclei, bounds)`,
		volume, id, numbers[0], numbers[1], ended, numbers[2], numbers[3], numbers[4], numbers[5], numbers[6], bounds)
}

// nm is a coordinate as it is stored: whole nanometres.
func nm(x float64) ID { return ID(int64(x)) }

// settled waits until no transaction holds the volume's head, so that what was under way is decided.
func (v *Volume) settled(ctx context.Context) error {
	return pg.InTx(ctx, v.pool, func(ctx context.Context, tx pgx.Tx) error {
		_, err := tx.Exec(ctx, `select from head where volume_id = $1 for update`, v.info.VolumeID)
		return err
	})
}
