package base

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"errors"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"unicode/utf8"
)

// longestLine is far beyond any honest line; it bounds what a broken file can make us hold.
const longestLine = 1 << 20

// csvSource reads RFC 4180 text: a header row, then rows, comma-separated, fields quoted or not. A quoted field may hold commas
// and doubled quotes; it ends on its line. Empty lines are passed over.
type csvSource struct {
	table    *table
	problems *problems
	warn     func(string)
	closers  []io.Closer
	counted  *countingReader
	in       *bufio.Reader
	line     int64
	columns  []int // column of the table by field, -1 for a column that nobody reads
	fields   [][]byte
	unquoted []byte
	crlf     bool
}

// openCSV opens a file and reads its header. nil: the header does not do, and the problems are noted.
func openCSV(path string, t *table, p *problems, warn func(string)) (*csvSource, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	s := &csvSource{table: t, problems: p, warn: warn, closers: []io.Closer{f}, counted: &countingReader{r: f}}
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
	if !s.header() {
		s.close()
		return nil, nil
	}
	return s, nil
}

func (s *csvSource) header() bool {
	if mark, _ := s.in.Peek(3); bytes.Equal(mark, []byte("\xef\xbb\xbf")) {
		s.in.Discard(3) //nolint:errcheck // they were just seen
		s.warn(s.table.name + " begins with a byte-order mark")
	}
	fields, ok := s.read()
	if !ok {
		s.problems.add(s.table.name, 0, "", "", "has no header row")
		return false
	}
	names := make([]string, len(fields))
	for i, f := range fields {
		names[i] = string(f)
	}
	s.columns, ok = matchColumns(s.table, names, s.line, s.problems, s.warn)
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
	fields, ok := s.read()
	if !ok {
		return false
	}
	r.line, r.bad = s.line, false
	if len(fields) != len(s.columns) {
		s.problems.add(s.table.name, s.line, "", "", "has "+strconv.Itoa(len(fields))+" fields where the header has "+strconv.Itoa(len(s.columns)))
		r.bad = true
		return true
	}
	for i := range r.cells {
		r.cells[i] = cell{}
	}
	for i, c := range s.columns {
		if c < 0 {
			continue
		}
		if reason := parseCell(&s.table.columns[c], fields[i], &r.cells[c]); reason != "" {
			s.problems.add(s.table.name, s.line, s.table.columns[c].name, string(fields[i]), reason)
			r.bad = true
		}
	}
	return true
}

// read splits the next line that is not empty.
func (s *csvSource) read() ([][]byte, bool) {
	for {
		line, err := s.in.ReadSlice('\n')
		if len(line) > 0 || err == nil {
			s.line++
		}
		switch {
		case errors.Is(err, bufio.ErrBufferFull):
			s.problems.add(s.table.name, s.line, "", "", "is longer than 1 MiB; the rest of the table was not read")
			return nil, false
		case err != nil && err != io.EOF:
			s.problems.add(s.table.name, s.line+1, "", "", "cannot be read, the file is damaged or cut short: "+err.Error())
			return nil, false
		case err == io.EOF && len(line) == 0:
			return nil, false
		}
		line = bytes.TrimSuffix(line, []byte("\n"))
		if bytes.HasSuffix(line, []byte("\r")) {
			line = line[:len(line)-1]
			if !s.crlf {
				s.crlf = true
				s.warn(s.table.name + " has lines that end in CR LF")
			}
		}
		if len(line) == 0 {
			continue
		}
		var reason string
		if s.fields, s.unquoted, reason = splitLine(line, s.fields[:0], s.unquoted[:0]); reason != "" {
			s.problems.add(s.table.name, s.line, "", string(line), reason)
			continue
		}
		return s.fields, true
	}
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

const (
	reasonEmpty    = "is empty"
	reasonID       = "is not an id: write a whole number from 0 to 18446744073709551615, digits only"
	reasonFloatID  = "is not an id: it went through a floating-point number, which loses digits"
	reasonCount    = "is not a whole number below 2^63"
	reasonNumber   = "is not a number"
	reasonInfinite = "is not a finite number"
	reasonText     = "is not UTF-8 text of at most 100 bytes"
)

// longestText bounds a text cell.
const longestText = 100

// parseCell reads one value; a reason when it cannot.
func parseCell(c *column, b []byte, into *cell) (reason string) {
	if len(b) == 0 {
		if c.optional {
			return ""
		}
		return reasonEmpty
	}
	into.given = true
	switch c.kind {
	case anID:
		id, err := ParseID(string(b))
		if err != nil {
			if _, err := strconv.ParseFloat(string(b), 64); err == nil && bytes.ContainsAny(b, ".eE") {
				return reasonFloatID
			}
			return reasonID
		}
		into.id = id
	case aCount:
		n, err := strconv.ParseInt(string(b), 10, 64)
		if err != nil || b[0] == '+' {
			return reasonCount
		}
		into.count = n
	case aNumber:
		return parseNumber(b, &into.number)
	case someText:
		if into.text = string(b); len(b) > longestText || !utf8.Valid(b) || bytes.IndexByte(b, 0) >= 0 {
			return reasonText
		}
	}
	return ""
}

func parseNumber(b []byte, into *float64) (reason string) {
	x, err := strconv.ParseFloat(string(b), 64)
	switch {
	case errors.Is(err, strconv.ErrRange) || err == nil && (math.IsNaN(x) || math.IsInf(x, 0)):
		return reasonInfinite
	case err != nil || bytes.ContainsAny(b, "xXpP_"):
		return reasonNumber
	}
	*into = x
	return ""
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
