package ledger

import (
	"context"
	"errors"
	"strings"
	"time"
	"unicode/utf8"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Neuron is a cell that people follow by name. Its segment changes; the neuron stays.
type Neuron struct {
	Name    string
	Anchor  ID // the supervoxel it is pinned to, usually in the soma
	AddedBy string
	AddedAt time.Time
	Segment ID // that holds the anchor at the position asked about
}

// AddNeuron names a cell. A name or an anchor that is taken is fault.Conflict.
func (v *Volume) AddNeuron(ctx context.Context, name string, anchor ID, by string) (Neuron, error) {
	name = strings.TrimSpace(name)
	if name == "" || utf8.RuneCountInString(name) > 100 {
		return Neuron{}, fault.New(fault.Invalid, "neuron-name", "a neuron's name has 1 to 100 characters").WithField("name")
	}
	if _, err := v.ordinals([]ID{anchor}); err != nil {
		return Neuron{}, err
	}
	_, err := v.pool.Exec(ctx, `insert into neuron (volume_id, name, anchor, added_by) values ($1, $2, $3, $4)`,
		v.info.VolumeID, name, anchor, by)
	switch pg.Constraint(err) {
	case "neuron_pkey":
		return Neuron{}, fault.Newf(fault.Conflict, "neuron-exists", "volume %s has a neuron %s already", v.info.Name, name).
			WithNext("take another name").WithField("name")
	case "neuron_anchor":
		return Neuron{}, fault.Newf(fault.Conflict, "neuron-anchor-taken", "supervoxel %s is the anchor of another neuron", anchor).
			WithNext("list the neurons to see which").WithField("anchor")
	}
	if err != nil {
		return Neuron{}, err
	}
	return v.Neuron(ctx, name, At{})
}

const neuronColumns = `select name, anchor, added_by, added_at from neuron where volume_id = $1`

// Neurons lists the neurons by name, with the segments that hold their anchors at a moment.
func (v *Volume) Neurons(ctx context.Context, at At) ([]Neuron, error) {
	rows, err := v.pool.Query(ctx, neuronColumns+` order by name`, v.info.VolumeID)
	if err != nil {
		return nil, err
	}
	list, err := pgx.CollectRows(rows, scanNeuron)
	if err != nil {
		return nil, err
	}
	return list, v.place(ctx, list, at)
}

// Neuron is one neuron by name; fault.NotFound when there is none.
func (v *Volume) Neuron(ctx context.Context, name string, at At) (Neuron, error) {
	rows, err := v.pool.Query(ctx, neuronColumns+` and name = $2`, v.info.VolumeID, name)
	if err != nil {
		return Neuron{}, err
	}
	n, err := pgx.CollectExactlyOneRow(rows, scanNeuron)
	if errors.Is(err, pgx.ErrNoRows) {
		return n, fault.Newf(fault.NotFound, "neuron-unknown", "volume %s has no neuron %s", v.info.Name, name).
			WithNext("list the neurons, or add this one with its anchor")
	}
	if err != nil {
		return n, err
	}
	list := []Neuron{n}
	err = v.place(ctx, list, at)
	return list[0], err
}

func scanNeuron(row pgx.CollectableRow) (Neuron, error) {
	var n Neuron
	err := row.Scan(&n.Name, &n.Anchor, &n.AddedBy, &n.AddedAt)
	return n, err
}

func (v *Volume) place(ctx context.Context, list []Neuron, at At) error {
	anchors := make([]ID, len(list))
	for i, n := range list {
		anchors[i] = n.Anchor
	}
	segments, err := v.SegmentsOf(ctx, anchors, at)
	if err != nil {
		return err
	}
	for i := range list {
		list[i].Segment = segments[i]
	}
	return nil
}
