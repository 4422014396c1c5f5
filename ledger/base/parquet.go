package base

import (
	"cmp"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"
)

// parquetSource reads the columns of a Parquet file side by side, value by value. The library would also fill
// structs, but then turns nulls into 0 and negative numbers into huge ids without a word, so types are checked here
// and nulls are seen.
type parquetSource struct {
	table    *table
	f        *os.File
	size     int64
	rows     int64 // of the file
	groups   []parquet.RowGroup
	columns  []parquetColumn
	open     []parquet.ColumnChunkValueReader // of the present row group, by column
	left     int64                            // rows of it that are not read yet
	batch    []cell                           // row by row
	values   []parquet.Value
	rowsHeld int          // rows in the batch
	faults   []batchFault // of the batch, by row, then column
	at       int          // next row of the batch
	row      int64        // of the file
	over     bool
}

// parquetColumn reads one column of the file into one of the table.
type parquetColumn struct {
	column int // of the table
	leaf   int // of the file
	read   func(parquet.Value, *cell) (reason string)
}

// batchFault is a fault of a row of the batch.
type batchFault struct {
	row int
	cellFault
}

// parquetBatch is how many rows are read at once.
const parquetBatch = 1024

// openParquet opens a file and checks its columns. nil: they do not do, and the problems are noted.
func openParquet(path string, t *table, p *problems, warn func(string)) (s *parquetSource, err error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	st, err := f.Stat()
	if err != nil {
		f.Close() //nolint:errcheck // read only
		return nil, err
	}
	s = &parquetSource{table: t, f: f, size: st.Size()}
	ok := false
	damage := guard(func() error {
		pf, err := parquet.OpenFile(f, st.Size(), parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true))
		if err == nil {
			ok = s.accept(pf, p, warn)
		}
		return err
	})
	if damage != nil {
		p.add(t.name, 0, "", "", "is not a Parquet file, or a damaged one: "+damage.Error())
	}
	if !ok {
		s.close()
		return nil, nil
	}
	return s, nil
}

// guard turns the library's panics about damaged files into errors.
func guard(fn func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("%v", r)
		}
	}()
	return fn()
}

// accept checks names, types and compression.
func (s *parquetSource) accept(pf *parquet.File, p *problems, warn func(string)) bool {
	var leaves []*parquet.Column
	var names []string
	for _, c := range pf.Root().Columns() {
		leaves, names = append(leaves, c), append(names, c.Name())
	}
	columns, ok := matchColumns(s.table, names, 0, p, warn)
	for i, c := range columns {
		if c < 0 {
			continue
		}
		col := &s.table.columns[c]
		var read func(parquet.Value, *cell) string
		reason := "is nested or repeated"
		if leaves[i].Leaf() && !leaves[i].Repeated() {
			read, reason = readerOf(col, leaves[i].Type())
		}
		if reason != "" {
			p.add(s.table.name, 0, col.name, "", reason)
			ok = false
			continue
		}
		s.columns = append(s.columns, parquetColumn{c, leaves[i].Index(), read})
	}
	// LZ4 comes out wrong, and without an error (parquet-go issue 608).
	for _, g := range pf.Metadata().RowGroups {
		for _, c := range s.columns {
			if codec := g.Columns[c.leaf].MetaData.Codec; ok && (codec == format.Lz4Raw || codec == format.Lz4) {
				p.add(s.table.name, 0, s.table.columns[c.column].name, "", "is compressed with LZ4, which cannot be read reliably: write the file with zstd, snappy or gzip")
				ok = false
			}
		}
	}
	s.rows, s.groups = pf.NumRows(), pf.RowGroups()
	return ok
}

func (s *parquetSource) next(r *row) bool {
	r.faults = r.faults[:0]
	if s.at == s.rowsHeld {
		if s.over {
			return false
		}
		s.rowsHeld, s.faults, s.at = 0, s.faults[:0], 0
		if err := guard(s.fillColumns); err != nil {
			s.over = true
			r.line = s.row + 1
			r.fault(-1, "", "cannot be read, the file is damaged or cut short: "+err.Error())
			return true
		}
		if s.rowsHeld == 0 {
			return false
		}
	}
	s.row++
	r.line = s.row
	width := len(s.table.columns)
	copy(r.cells, s.batch[s.at*width:(s.at+1)*width])
	for len(s.faults) > 0 && s.faults[0].row == s.at {
		r.faults = append(r.faults, s.faults[0].cellFault)
		s.faults = s.faults[1:]
	}
	s.at++
	return true
}

// fillColumns reads the next rows into the batch.
func (s *parquetSource) fillColumns() error {
	for s.left == 0 {
		if len(s.groups) == 0 {
			s.over = true
			return nil
		}
		s.closeGroup()
		g := s.groups[0]
		s.groups, s.left = s.groups[1:], g.NumRows()
		chunks := g.ColumnChunks()
		for _, c := range s.columns {
			s.open = append(s.open, parquet.NewColumnChunkValueReader(chunks[c.leaf]))
		}
	}
	n := int(min(s.left, parquetBatch))
	if s.batch == nil {
		s.batch = make([]cell, parquetBatch*len(s.table.columns))
		s.values = make([]parquet.Value, parquetBatch)
	}
	clear(s.batch)
	for i, c := range s.columns {
		if err := s.fillColumn(c, s.open[i], s.values[:n]); err != nil {
			return fmt.Errorf("column %s: %w", s.table.columns[c.column].name, err)
		}
	}
	s.left -= int64(n)
	s.rowsHeld = n
	slices.SortFunc(s.faults, func(a, b batchFault) int { return cmp.Or(cmp.Compare(a.row, b.row), cmp.Compare(a.column, b.column)) })
	return nil
}

// fillColumn reads one value for each row of the batch.
func (s *parquetSource) fillColumn(c parquetColumn, in parquet.ColumnChunkValueReader, values []parquet.Value) error {
	col := &s.table.columns[c.column]
	for at := 0; at < len(values); {
		n, err := in.ReadValues(values[at:])
		for k, v := range values[at : at+n] { // converted at once: the bytes of a text belong to the reader
			cell := &s.batch[(at+k)*len(s.table.columns)+c.column]
			reason, value := "", ""
			switch {
			case !v.IsNull():
				if reason = c.read(v, cell); reason != "" {
					value = strings.ToValidUTF8(v.String(), "?")
				}
			case !col.optional:
				reason = reasonEmpty
			}
			if reason != "" {
				s.faults = append(s.faults, batchFault{at + k, cellFault{c.column, clip(value), reason}})
			}
		}
		if at += n; at == len(values) {
			return nil
		}
		if errors.Is(err, io.EOF) || err == nil && n == 0 {
			return io.ErrUnexpectedEOF
		}
		if err != nil {
			return err
		}
	}
	return nil
}

func (s *parquetSource) done() int64 {
	if s.rows == 0 {
		return s.size
	}
	return int64(float64(s.size) * float64(s.row) / float64(s.rows))
}

func (s *parquetSource) odd() []string { return nil }

func (s *parquetSource) closeGroup() {
	for _, r := range s.open {
		r.Close() //nolint:errcheck // read only
	}
	s.open = s.open[:0]
}

func (s *parquetSource) close() {
	guard(func() error { s.closeGroup(); return nil }) //nolint:errcheck // read only
	s.f.Close()                                        //nolint:errcheck // read only
}
