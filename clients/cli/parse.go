package cli

import (
	"bufio"
	"encoding/csv"
	"errors"
	"io"
	"os"
	"strconv"
	"strings"
	"time"
)

// parseID holds a word to be an id: decimal digits of at most 64 bits. Ids stay text on the way to the server, so
// that no form of number can round them.
func parseID(word string) (string, error) {
	if _, err := strconv.ParseUint(word, 10, 64); err != nil || word[0] == '+' || len(word) > 1 && word[0] == '0' {
		return "", usage("%q is not an id", word).WithNext("give an id as a whole number from 0 to 18446744073709551615, digits only")
	}
	return word, nil
}

// parseIDs holds words, each of them perhaps several with commas, to be ids.
func parseIDs(words []string) ([]string, error) {
	var ids []string
	for _, word := range words {
		for _, w := range strings.Split(word, ",") {
			id, err := parseID(strings.TrimSpace(w))
			if err != nil {
				return nil, err
			}
			ids = append(ids, id)
		}
	}
	return ids, nil
}

// parseNumber holds a word to be a task's number or an entry's position.
func parseNumber(word, what string) (int64, error) {
	n, err := strconv.ParseInt(word, 10, 64)
	if err != nil || n < 1 {
		return 0, usage("%q is not %s", word, what).WithNext("give a whole number, 1 or above")
	}
	return n, nil
}

func parseNumbers(words []string, what string) ([]int64, error) {
	var out []int64
	for _, word := range words {
		n, err := parseNumber(word, what)
		if err != nil {
			return nil, err
		}
		out = append(out, n)
	}
	return out, nil
}

// parsePoint reads "x,y,z" in nm.
func parsePoint(word string) ([3]float64, error) {
	var p [3]float64
	parts := strings.Split(word, ",")
	if len(parts) != len(p) {
		return p, usage("%q is not a point", word).WithNext("give x,y,z in nm, without spaces")
	}
	for i, part := range parts {
		v, err := strconv.ParseFloat(part, 64)
		if err != nil {
			return p, usage("%q is not a point: %q is no number", word, part).WithNext("give x,y,z in nm, without spaces")
		}
		p[i] = v
	}
	return p, nil
}

// seed is a supervoxel, by its id or by a point that the server finds the nearest one to.
type seed struct {
	id    string
	point *[3]float64
}

// parseSeed reads an id, or "@x,y,z" in nm.
func parseSeed(word string) (seed, error) {
	if at, ok := strings.CutPrefix(word, "@"); ok {
		p, err := parsePoint(at)
		return seed{point: &p}, err
	}
	id, err := parseID(word)
	return seed{id: id}, err
}

// parseGroup reads the seeds of one side: "12,13" or "@100,200,300" or both, "12,@100,200,300".
func parseGroup(words string) ([]seed, error) {
	var out []seed
	rest := strings.Split(words, ",")
	for len(rest) > 0 {
		word := rest[0]
		take := 1
		if strings.HasPrefix(word, "@") && len(rest) >= 3 {
			take = 3
		}
		s, err := parseSeed(strings.Join(rest[:take], ","))
		if err != nil {
			return nil, err
		}
		out, rest = append(out, s), rest[take:]
	}
	return out, nil
}

// parseAt reads the moment that a question is about: a position, or a time. Nothing is now.
func parseAt(word string) (position *int64, moment *time.Time, err error) {
	if word == "" {
		return nil, nil, nil
	}
	if n, err := strconv.ParseInt(word, 10, 64); err == nil && n >= 0 {
		return &n, nil, nil
	}
	t, err := parseTime(word)
	if err != nil {
		return nil, nil, err
	}
	return nil, &t, nil
}

// parseTime reads RFC 3339, or a day or minute in local time.
func parseTime(word string) (time.Time, error) {
	if t, err := time.Parse(time.RFC3339Nano, word); err == nil {
		return t, nil
	}
	for _, layout := range []string{time.DateOnly, "2006-01-02 15:04", time.DateTime} {
		if t, err := time.ParseInLocation(layout, word, time.Local); err == nil {
			return t, nil
		}
	}
	return time.Time{}, usage("%q is neither a position nor a time", word).
		WithNext(`give a position such as 12, or a time such as 2026-12-01T09:30:00Z or "2026-12-01 09:30"`)
}

// readIDs reads ids from a file, "-" for standard input: the first value of each line. A first line that is no id is
// a heading.
func (a *app) readIDs(path string) ([]string, error) {
	in := a.In
	if path != "-" {
		f, err := os.Open(path)
		if err != nil {
			return nil, usage("cannot read %s", path).WithNext("check the path").Wrap(err)
		}
		defer f.Close()
		in = f
	}
	table := csv.NewReader(bufio.NewReader(in))
	table.FieldsPerRecord, table.ReuseRecord, table.TrimLeadingSpace = -1, true, true
	var ids []string
	for line := 1; ; line++ {
		row, err := table.Read()
		if errors.Is(err, io.EOF) {
			return ids, nil
		}
		if err != nil {
			return nil, usage("%s is not a table: %v", path, err)
		}
		id, err := parseID(strings.TrimPrefix(strings.TrimSpace(row[0]), "\ufeff"))
		switch {
		case err == nil:
			ids = append(ids, id)
		case line > 1:
			return nil, usage("line %d of %s: %q is not an id", line, path, row[0]).WithNext("put one id first in every line")
		}
	}
}

func joinIDs(ids []string) string { return strings.Join(ids, ",") }
