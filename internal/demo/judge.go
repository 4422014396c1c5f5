package demo

import (
	"context"
	"slices"
	"strconv"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/synth"
)

// judge says how a person would resolve a task.
func (m *member) judge(ctx context.Context, task fettle.Task, mind *synth.Oracle) (synth.Verdict, error) {
	p := task.Proposal
	if task.Kind == "false-split" {
		if p == nil || p.A == nil || p.B == nil {
			return synth.Verdict{Outcome: synth.Unclear}, nil
		}
		return mind.Merge(number(*p.A), number(*p.B)), nil
	}
	members, err := m.members(ctx, task.Segments[0])
	if err != nil {
		return synth.Verdict{}, err
	}
	groups := m.twoLargest(members)
	if p != nil && p.Groups != nil {
		groups = groupsOf(*p.Groups)
	}
	if len(groups) < 2 {
		return synth.Verdict{Outcome: synth.Sound}, nil
	}
	return mind.Split(groups, members), nil
}

// scrap is how many supervoxels of another cell do not make a segment worth dividing.
const scrap = 5

// twoLargest are the supervoxels of the two neurons that hold most of a segment: what somebody sees who looks at a
// segment for which nothing is proposed. One group when there is only one neuron.
func (m *member) twoLargest(members []uint64) [][]uint64 {
	byNeuron := map[uint64][]uint64{}
	for _, id := range members {
		if n := m.Truth[id]; n != 0 {
			byNeuron[n] = append(byNeuron[n], id)
		}
	}
	var groups [][]uint64
	for _, ids := range byNeuron {
		if len(ids) > scrap {
			groups = append(groups, ids)
		}
	}
	slices.SortFunc(groups, func(a, b []uint64) int {
		if len(a) != len(b) {
			return len(b) - len(a)
		}
		return slices.Compare(a, b)
	})
	return groups[:min(2, len(groups))]
}

// members lists a segment's supervoxels.
func (m *member) members(ctx context.Context, segment string) ([]uint64, error) {
	var out []uint64
	var cursor *string
	limit := 1000
	for {
		page, err := fettle.Read[fettle.Members](m.api.ListMembers(ctx, m.Volume, segment, &fettle.ListMembersParams{Cursor: cursor, Limit: &limit}))
		if err != nil {
			return nil, err
		}
		out = append(out, numbers(page.Items)...)
		if page.Next == nil {
			return out, nil
		}
		cursor = page.Next
	}
}

// number reads an id. The server wrote it, so it is one.
func number(id string) uint64 {
	n, _ := strconv.ParseUint(id, 10, 64)
	return n
}

func numbers(ids []string) []uint64 {
	out := make([]uint64, len(ids))
	for i, id := range ids {
		out[i] = number(id)
	}
	return out
}

func groupsOf(groups []fettle.IDs) [][]uint64 {
	out := make([][]uint64, len(groups))
	for i, g := range groups {
		out[i] = numbers(g)
	}
	return out
}

func seedOf(id string) fettle.Seed { return fettle.Seed{Supervoxel: &id} }

func seedsOf(groups [][]uint64) [][]fettle.Seed {
	out := make([][]fettle.Seed, len(groups))
	for i, g := range groups {
		for _, id := range g {
			out[i] = append(out[i], seedOf(strconv.FormatUint(id, 10)))
		}
	}
	return out
}
