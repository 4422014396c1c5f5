package base

import (
	"bufio"
	"bytes"
	"errors"
	"io"
	"os"
	"strconv"
	"strings"

	"github.com/klauspost/compress/gzip"
)

// longestLine is far beyond any honest line; it bounds what a broken file can make us hold.
const longestLine = 1 << 20

// csvSource reads RFC 4180 text: a header row, then rows, comma-separated, fields quoted or not. A quoted field may hold commas
// and doubled quotes; it ends on its line. Empty lines are passed over.
type csvSource struct {
	table    *table
	closers  []io.Closer
	counted  *countingReader
	in       *bufio.Reader
	line     int64
	columns  []int // column of the table by field, -1 for a column that nobody reads
	fields   [][]byte
	unquoted []byte
	crlf     bool
	over     bool
}

// openCSV opens a file and reads its header. nil: the header does not do, and the problems are noted.
func openCSV(path string, t *table, p *problems, warn func(string)) (*csvSource, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	s := &csvSource{table: t, closers: []io.Closer{f}, counted: &countingReader{r: f}}
	var in io.Reader = s.counted
	if strings.HasSuffix(path, ".gz") {
		z, err := gzip.NewReader(bufio.NewReaderSize(s.counted, 1<<16))
		if err != nil {
			p.add(t.name, 0, "", "", "is not a gzip file: "+err.Error())
			s.close()
			return nil, nil
		}
		in = z
	}
	s.in = bufio.NewReaderSize(in, longestLine)
	if !s.header(p, warn) {
		s.close()
		return nil, nil
	}
	return s, nil
}

func (s *csvSource) header(p *problems, warn func(string)) bool {
	if mark, _ := s.in.Peek(3); bytes.Equal(mark, []byte("\xef\xbb\xbf")) {
		s.in.Discard(3) //nolint:errcheck // they were just seen
		warn(s.table.name + " begins with a byte-order mark")
	}
	line, reason := s.readLine()
	if line == nil && reason == "" {
		reason = "has no header row"
	}
	if reason == "" {
		s.fields, s.unquoted, reason = splitLine(line, s.fields[:0], s.unquoted[:0])
	}
	if reason != "" {
		p.add(s.table.name, s.line, "", "", reason)
		return false
	}
	names := make([]string, len(s.fields))
	for i, f := range s.fields {
		names[i] = string(f)
	}
	var ok bool
	s.columns, ok = matchColumns(s.table, names, s.line, p, warn)
	return ok
}

// matchColumns finds the table's columns among the delivered names.
func matchColumns(t *table, names []string, line int64, p *problems, warn func(string)) (columns []int, ok bool) {
	ok = true
	seen := make(map[int]bool)
	for _, name := range names {
		c := t.find(name)
		switch {
		case c < 0:
			warn(t.name + " has a column " + strconv.Quote(clip(name)) + " that is not read")
		case seen[c]:
			p.add(t.name, line, name, "", "the column is there twice")
			ok = false
		}
		seen[c] = true
		columns = append(columns, c)
	}
	for c, col := range t.columns {
		if !seen[c] && !col.optional {
			p.add(t.name, line, col.name, "", "the column is missing")
			ok = false
		}
	}
	return columns, ok
}

func (s *csvSource) next(r *row) bool {
	line, reason := s.readLine()
	if line == nil && reason == "" {
		return false
	}
	r.line, r.faults = s.line, r.faults[:0]
	clear(r.cells)
	if reason == "" {
		s.fields, s.unquoted, reason = splitLine(line, s.fields[:0], s.unquoted[:0])
	}
	if reason == "" && len(s.fields) != len(s.columns) {
		reason = "has " + strconv.Itoa(len(s.fields)) + " fields where the header has " + strconv.Itoa(len(s.columns))
	}
	if reason != "" {
		r.fault(-1, string(line[:min(len(line), longestText)]), reason)
		return true
	}
	for i, c := range s.columns {
		if c < 0 {
			continue
		}
		if reason := parseCell(&s.table.columns[c], s.fields[i], &r.cells[c]); reason != "" {
			r.fault(c, string(s.fields[i]), reason)
		}
	}
	return true
}

// readLine is the next line that is not empty; nil at the end of the file, and when a reason says why no more can be
// read.
func (s *csvSource) readLine() (line []byte, reason string) {
	for !s.over {
		line, err := s.in.ReadSlice('\n')
		switch {
		case err == nil || err == io.EOF && len(line) > 0:
			s.line++
		case err == io.EOF:
			s.over = true
			return nil, ""
		case errors.Is(err, bufio.ErrBufferFull):
			s.over = true
			s.line++
			return nil, "is longer than 1 MiB; the rest of the table was not read"
		default:
			s.over = true
			s.line++
			return nil, "cannot be read, the file is damaged or cut short: " + err.Error()
		}
		line = bytes.TrimSuffix(line, []byte("\n"))
		if n := len(line); n > 0 && line[n-1] == '\r' {
			line = line[:n-1]
			s.crlf = true
		}
		if len(line) > 0 {
			return line, ""
		}
	}
	return nil, ""
}

func (s *csvSource) odd() []string {
	if s.crlf {
		return []string{s.table.name + " has lines that end in CR LF"}
	}
	return nil
}

// splitLine appends the fields of one line. Quoted fields are unquoted into spare, which is returned grown.
func splitLine(line []byte, fields [][]byte, spare []byte) (out [][]byte, grown []byte, reason string) {
	if bytes.IndexByte(line, '"') < 0 {
		for {
			i := bytes.IndexByte(line, ',')
			if i < 0 {
				return append(fields, line), spare, ""
			}
			fields, line = append(fields, line[:i]), line[i+1:]
		}
	}
	for {
		if len(line) == 0 || line[0] != '"' {
			i := bytes.IndexByte(line, ',')
			field := line
			if i >= 0 {
				field = line[:i]
			}
			if bytes.IndexByte(field, '"') >= 0 {
				return fields, spare, "has a quote inside a field that is not quoted"
			}
			fields = append(fields, field)
			if i < 0 {
				return fields, spare, ""
			}
			line = line[i+1:]
			continue
		}
		from := len(spare)
		line = line[1:]
		for {
			i := bytes.IndexByte(line, '"')
			if i < 0 {
				return fields, spare, "has a quoted field that does not end on its line"
			}
			spare = append(spare, line[:i]...)
			line = line[i+1:]
			if len(line) == 0 || line[0] != '"' {
				break
			}
			spare, line = append(spare, '"'), line[1:]
		}
		fields = append(fields, spare[from:len(spare):len(spare)])
		if len(line) == 0 {
			return fields, spare, ""
		}
		if line[0] != ',' {
			return fields, spare, "has text after a closing quote"
		}
		line = line[1:]
	}
}

func (s *csvSource) done() int64 { return s.counted.n }

func (s *csvSource) close() {
	for _, c := range s.closers {
		c.Close() //nolint:errcheck // read only
	}
}

type countingReader struct {
	r io.Reader
	n int64
}

func (c *countingReader) Read(p []byte) (int, error) {
	n, err := c.r.Read(p)
	c.n += int64(n)
	return n, err
}
