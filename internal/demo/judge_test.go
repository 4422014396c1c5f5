package demo

import (
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestWhoeverLooksAtASegmentSeesItsTwoLargestCells(t *testing.T) {
	truth := map[uint64]uint64{}
	segment := []uint64{}
	for cell, n := range map[uint64]int{1: 20, 2: 30, 3: 10, 4: scrap} {
		for i := range n {
			id := cell*100 + uint64(i)
			truth[id], segment = cell, append(segment, id)
		}
	}
	m := &member{Team: &Team{Truth: truth}}
	var cells [][2]int
	for _, group := range m.twoLargest(append(segment, 999)) { // 999 belongs to no cell
		cells = append(cells, [2]int{int(truth[group[0]]), len(group)})
	}
	if d := cmp.Diff([][2]int{{2, 30}, {1, 20}}, cells); d != "" {
		t.Error(d)
	}
	if groups := m.twoLargest(segment[:0]); len(groups) != 0 {
		t.Errorf("nothing has cells: %v", groups)
	}
}
