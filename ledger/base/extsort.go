package base

import (
	"bufio"
	"container/heap"
	"io"
	"os"
)

// record is how a sorter keeps a T in a file, a fixed number of bytes, and what it sorts by: two numbers, the first
// before the second. Keys of different records must differ, or the result would depend on the order of adding.
type record[T any] struct {
	size int
	put  func([]byte, *T)
	get  func([]byte, *T)
	key  func(T) (high, low uint64)
}

// sorterHolds is how many bytes of records a sorter holds before it writes a sorted run to a file.
const sorterHolds = 16 << 20

// sorter sorts any number of records in bounded memory: sorted runs in temporary files, merged while they are read
// (the textbook's external merge sort).
type sorter[T any] struct {
	record[T]
	dir   string
	hold  []T
	spare []T // room for sorting
	most  int
	runs  []string
}

func newSorter[T any](dir string, r record[T]) *sorter[T] {
	return &sorter[T]{record: r, dir: dir, most: max(1, sorterHolds/r.size)}
}

// add takes a record in. After each it must not be called again.
func (s *sorter[T]) add(x T) error {
	s.hold = append(s.hold, x)
	if len(s.hold) < s.most {
		return nil
	}
	return s.spill()
}

func (s *sorter[T]) sortHeld() { s.hold, s.spare = radixSort(s.hold, s.spare, s.key) }

// keyBytes is the length of a key.
const keyBytes = 16

// radixSort sorts by the bytes of the keys, the lowest first, passing over bytes that are the same in all. O(n) for each
// of the others; several times as fast as comparing. It needs room for as many and returns that too, since either may hold
// the result.
func radixSort[T any](a, spare []T, key func(T) (high, low uint64)) (sorted, room []T) {
	var counts [keyBytes][256]int
	for _, x := range a {
		high, low := key(x)
		for b := range 8 {
			counts[b][byte(low>>(8*b))]++
			counts[b+8][byte(high>>(8*b))]++
		}
	}
	if cap(spare) < len(a) {
		spare = make([]T, len(a))
	}
	spare = spare[:len(a)]
	for b := range keyBytes {
		at, next, alike := &counts[b], 0, false
		for v, n := range at {
			alike = alike || n == len(a)
			at[v] = next
			next += n
		}
		if alike {
			continue
		}
		for _, x := range a {
			high, low := key(x)
			if b >= 8 {
				low = high
			}
			v := byte(low >> (8 * (b % 8)))
			spare[at[v]] = x
			at[v]++
		}
		a, spare = spare, a
	}
	return a, spare
}

func (s *sorter[T]) spill() (err error) {
	s.sortHeld()
	f, err := os.CreateTemp(s.dir, "run-*")
	if err != nil {
		return err
	}
	defer func() {
		if e := f.Close(); err == nil {
			err = e
		}
	}()
	s.runs = append(s.runs, f.Name())
	w := bufio.NewWriterSize(f, 1<<18)
	buf := make([]byte, s.size)
	for i := range s.hold {
		s.put(buf, &s.hold[i])
		if _, err := w.Write(buf); err != nil {
			return err
		}
	}
	s.hold = s.hold[:0]
	return w.Flush()
}

// sorted begins to read the records in order; it may be called again for another pass.
func (s *sorter[T]) sorted() (*merged[T], error) {
	if len(s.runs) == 0 {
		s.sortHeld()
		s.spare = nil
		return &merged[T]{record: s.record, held: s.hold}, nil
	}
	if len(s.hold) > 0 {
		if err := s.spill(); err != nil {
			return nil, err
		}
		s.hold, s.spare = nil, nil
	}
	m := &merged[T]{record: s.record}
	for _, name := range s.runs {
		f, err := os.Open(name)
		if err != nil {
			m.close()
			return nil, err
		}
		r := &sortedRun[T]{f: f, r: bufio.NewReaderSize(f, 1<<16), buf: make([]byte, s.size)}
		m.all = append(m.all, r)
		if ok, err := m.advance(r); err != nil {
			m.close()
			return nil, err
		} else if ok {
			m.live = append(m.live, r)
		}
	}
	heap.Init(m)
	return m, nil
}

// drop forgets everything and removes the files.
func (s *sorter[T]) drop() {
	for _, name := range s.runs {
		os.Remove(name) //nolint:errcheck // the whole folder goes at the end
	}
	s.hold, s.spare, s.runs = nil, nil, nil
}

// merged yields records in order.
type merged[T any] struct {
	record[T]
	held []T
	all  []*sortedRun[T]
	live []*sortedRun[T]
}

type sortedRun[T any] struct {
	f   *os.File
	r   *bufio.Reader
	buf []byte
	x   T

	high, low uint64 // key of x
}

func (m *merged[T]) advance(r *sortedRun[T]) (bool, error) {
	if _, err := io.ReadFull(r.r, r.buf); err == io.EOF {
		return false, nil
	} else if err != nil {
		return false, err
	}
	m.get(r.buf, &r.x)
	r.high, r.low = m.key(r.x)
	return true, nil
}

// next fills x; false at the end.
func (m *merged[T]) next(x *T) (bool, error) {
	if m.all == nil {
		if len(m.held) == 0 {
			return false, nil
		}
		*x, m.held = m.held[0], m.held[1:]
		return true, nil
	}
	if len(m.live) == 0 {
		return false, nil
	}
	r := m.live[0]
	*x = r.x
	ok, err := m.advance(r)
	switch {
	case err != nil:
		return false, err
	case ok:
		heap.Fix(m, 0)
	default:
		heap.Pop(m)
	}
	return true, nil
}

func (m *merged[T]) close() {
	for _, r := range m.all {
		r.f.Close() //nolint:errcheck // read only
	}
	m.all, m.live, m.held = nil, nil, nil
}

// The heap of runs by their first records.
func (m *merged[T]) Len() int      { return len(m.live) }
func (m *merged[T]) Swap(i, j int) { m.live[i], m.live[j] = m.live[j], m.live[i] }
func (m *merged[T]) Push(any)      { panic("base: a merge gains no runs") }
func (m *merged[T]) Less(i, j int) bool {
	a, b := m.live[i], m.live[j]
	return a.high < b.high || a.high == b.high && a.low < b.low
}
func (m *merged[T]) Pop() any {
	last := m.live[len(m.live)-1]
	m.live = m.live[:len(m.live)-1]
	return last
}
