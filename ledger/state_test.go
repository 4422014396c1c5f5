package ledger

import (
	"testing"
	"time"

	"fettle.example/fettle/ledger/base"
)

// TestAClockThatIsSetBack: the time of the last entry is kept however it came to be known, so that the next is never older.
func TestAClockThatIsSetBack(t *testing.T) {
	t.Parallel()
	noon := time.Date(2026, 3, 1, 12, 0, 0, 0, time.UTC)
	s := newState(new(base.Base))
	s.advance(&change{entry: Entry{Position: 1, At: noon}})
	s.advance(&change{entry: Entry{Position: 2, At: noon.Add(-time.Hour)}})
	if !s.last.Equal(noon) {
		t.Errorf("the next entry may be as old as %s", s.last)
	}
}
