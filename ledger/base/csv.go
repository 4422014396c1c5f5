package base

import (
	"bufio"
	"bytes"
	"errors"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"unicode/utf8"

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
		return parseIDCell(b, &into.id)
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

// parseIDCell is ParseID without the copy.
func parseIDCell(b []byte, into *ID) (reason string) {
	if n, digits := decimal(b); digits == len(b) && (digits == 1 || b[0] != '0') {
		*into = ID(n)
		return ""
	}
	id, err := ParseID(string(b))
	if err != nil {
		if _, err := strconv.ParseFloat(string(b), 64); err == nil && bytes.ContainsAny(b, ".eE") {
			return reasonFloatID
		}
		return reasonID
	}
	*into = id
	return ""
}

// decimal reads up to 19 leading digits, which always fit.
func decimal(b []byte) (n uint64, digits int) {
	for digits < len(b) && digits < 19 && '0' <= b[digits] && b[digits] <= '9' {
		n = n*10 + uint64(b[digits]-'0')
		digits++
	}
	return n, digits
}

// tens are the powers of ten that a double holds exactly and a short fraction needs.
var tens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

func parseNumber(b []byte, into *float64) (reason string) {
	// Digits, a dot, digits, 15 at most: both the digits as a whole number and the power of ten are exact, so one division
	// rounds correctly (Clinger 1990).
	if n, whole := decimal(b); whole > 0 && whole <= 15 {
		if whole == len(b) {
			*into = float64(n)
			return ""
		}
		if b[whole] == '.' {
			fraction, digits := decimal(b[whole+1:])
			if digits > 0 && whole+digits <= 15 && whole+1+digits == len(b) {
				*into = (float64(n)*tens[digits] + float64(fraction)) / tens[digits]
				return ""
			}
		}
	}
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
