package triage

import "math/bits"

// meeting finds where the ways of two supervoxels to the root meet, by jumps of powers of two (binary lifting). O(n log n)
// to make, O(log n) to ask.
type meeting struct {
	level []int32
	jump  [][]int32
}

func newMeeting(t *tree) *meeting {
	n := len(t.parent)
	m := &meeting{level: make([]int32, n)}
	deepest := int32(0)
	for _, v := range t.order {
		if p := t.parent[v]; p != none {
			m.level[v] = m.level[p] + 1
			deepest = max(deepest, m.level[v])
		}
	}
	m.jump = append(m.jump, t.parent)
	for range bits.Len32(uint32(deepest)) {
		last := m.jump[len(m.jump)-1]
		next := make([]int32, n)
		for v := range next {
			if next[v] = last[v]; next[v] != none {
				next[v] = last[next[v]]
			}
		}
		m.jump = append(m.jump, next)
	}
	return m
}

// of is the meeting point of two supervoxels; none when they are in different pieces.
func (m *meeting) of(a, b int32) int32 {
	if m.level[a] < m.level[b] {
		a, b = b, a
	}
	for k, rise := 0, m.level[a]-m.level[b]; rise > 0; k, rise = k+1, rise>>1 {
		if rise&1 == 1 {
			a = m.jump[k][a]
		}
	}
	if a == b {
		return a
	}
	for k := len(m.jump) - 1; k >= 0; k-- {
		if m.jump[k][a] != m.jump[k][b] {
			a, b = m.jump[k][a], m.jump[k][b]
		}
	}
	return m.jump[0][a]
}
