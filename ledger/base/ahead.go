package base

// aheadRows is how many rows are handed over at once.
const aheadRows = 512

// readingAhead reads and parses a table in a goroutine of its own, a few batches before they are checked.
type readingAhead struct {
	src     source
	full    chan aheadBatch
	free    chan []row
	stopped chan struct{}
	held    []row
}

type aheadBatch struct {
	rows []row
	done int64 // bytes of the file
}

// readAhead begins to read. It owns the source, which stop closes.
func readAhead(src source, columns int) *readingAhead {
	const batches = 4
	a := &readingAhead{src: src, full: make(chan aheadBatch, batches), free: make(chan []row, batches), stopped: make(chan struct{})}
	for range batches {
		rows, cells := make([]row, aheadRows), make([]cell, aheadRows*columns)
		for i := range rows {
			rows[i].cells = cells[i*columns : (i+1)*columns : (i+1)*columns]
		}
		a.free <- rows
	}
	go a.read()
	return a
}

func (a *readingAhead) read() {
	defer close(a.full)
	for {
		var rows []row
		select {
		case rows = <-a.free:
		case <-a.stopped:
			return
		}
		n := 0
		for n < len(rows) && a.src.next(&rows[n]) {
			n++
		}
		if n == 0 {
			return
		}
		a.full <- aheadBatch{rows[:n], a.src.done()}
	}
}

// next is the next rows, valid until the next call; nil at the end.
func (a *readingAhead) next() (rows []row, done int64) {
	if a.held != nil {
		a.free <- a.held[:aheadRows]
		a.held = nil
	}
	b, ok := <-a.full
	if !ok {
		return nil, 0
	}
	a.held = b.rows
	return b.rows, b.done
}

// odd is what the source found unusual; only after the last row.
func (a *readingAhead) odd() []string { return a.src.odd() }

// stop ends the reading, finished or not.
func (a *readingAhead) stop() {
	close(a.stopped)
	for range a.full { //nolint:revive // wait for the goroutine, which reads one batch more at most
	}
	a.src.close()
}
