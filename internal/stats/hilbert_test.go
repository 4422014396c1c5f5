package stats

import (
	"testing"
)

// Skilling's own example, as quoted in several open programs: 5 bits, (5, 10, 20) is 7865; and the first cells for 1 and 2 bits.
func TestHilbertOfSkilling(t *testing.T) {
	if i := Hilbert([3]uint32{5, 10, 20}, 5); i != 7865 {
		t.Errorf("(5, 10, 20): %d", i)
	}
	for bits, cells := range map[int][][3]uint32{
		1: {{0, 0, 0}, {0, 0, 1}, {0, 1, 1}, {0, 1, 0}, {1, 1, 0}, {1, 1, 1}, {1, 0, 1}, {1, 0, 0}},
		2: {{0, 0, 0}, {0, 1, 0}, {1, 1, 0}, {1, 0, 0}, {1, 0, 1}, {1, 1, 1}, {0, 1, 1}, {0, 0, 1}},
	} {
		for want, c := range cells {
			if got := Hilbert(c, bits); got != uint64(want) {
				t.Errorf("%v with %d bits: %d, want %d", c, bits, got, want)
			}
		}
	}
}

// The curve visits every cell once, always steps to a neighbour, and ends at the far end of x.
func TestHilbertIsACurve(t *testing.T) {
	for bits := 1; bits <= 4; bits++ {
		side := uint32(1) << bits
		cells := make([][3]uint32, side*side*side)
		seen := make([]bool, len(cells))
		for x := range side {
			for y := range side {
				for z := range side {
					i := Hilbert([3]uint32{x, y, z}, bits)
					if i >= uint64(len(cells)) || seen[i] {
						t.Fatalf("%d bits: place %d twice, or outside", bits, i)
					}
					cells[i], seen[i] = [3]uint32{x, y, z}, true
				}
			}
		}
		for i := 1; i < len(cells); i++ {
			moved := uint32(0)
			for k := range 3 {
				moved += max(cells[i][k], cells[i-1][k]) - min(cells[i][k], cells[i-1][k])
			}
			if moved != 1 {
				t.Fatalf("%d bits: step from %v to %v", bits, cells[i-1], cells[i])
			}
		}
		if end := cells[len(cells)-1]; end != [3]uint32{side - 1, 0, 0} {
			t.Errorf("%d bits: ends at %v", bits, end)
		}
	}
}

func TestHilbertInABox(t *testing.T) {
	lo, hi := [3]float64{100, 100, 100}, [3]float64{1100, 600, 300}
	if HilbertAt(lo, lo, hi) != 0 || HilbertAt([3]float64{-9, -9, -9}, lo, hi) != 0 {
		t.Error("the near corner is first, and so is all beyond it")
	}
	end := HilbertAt([3]float64{5000, 100, 100}, lo, hi)
	if want := uint64(1)<<(3*HilbertBits) - 1; end != want {
		t.Errorf("the far end of the long axis: %d, want %d", end, want)
	}
	if HilbertAt(hi, lo, lo) != 0 {
		t.Error("a box without size has one place")
	}
}
