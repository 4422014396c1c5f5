package base_test

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	gocmp "github.com/google/go-cmp/cmp"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/parquet-go/parquet-go"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger/base"
)

// files of a delivery by name.
type files map[string]string

func tinyFiles(t testing.TB) files {
	t.Helper()
	f := make(files)
	for _, name := range []string{"volume.json", "supervoxels.csv", "contacts.csv", "synapses.csv", "nuclei.csv", "truth.csv"} {
		b, err := os.ReadFile(filepath.Join(tiny, name))
		if err != nil {
			t.Fatal(err)
		}
		f[name] = string(b)
	}
	return f
}

// swap replaces a piece of a file, which must be there once.
func (f files) swap(t testing.TB, name, old, with string) {
	t.Helper()
	if strings.Count(f[name], old) != 1 {
		t.Fatalf("%s holds %q %d times", name, old, strings.Count(f[name], old))
	}
	f[name] = strings.Replace(f[name], old, with, 1)
}

func (f files) write(t testing.TB) string {
	t.Helper()
	dir := t.TempDir()
	for name, content := range f {
		put(t, dir, name, []byte(content))
	}
	return dir
}

// stored counts the rows of everything that an import writes.
func stored(t testing.TB, pool *pgxpool.Pool) (n int) {
	t.Helper()
	err := pool.QueryRow(t.Context(), `
		select (select count(*) from volume) + (select count(*) from base_block)
		     + (select count(*) from base_synapse) + (select count(*) from base_nucleus)`).Scan(&n)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// TestBadDeliveriesAreRefused changes the tiny delivery in one place each and expects exactly the problems named, and
// nothing stored.
func TestBadDeliveriesAreRefused(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	type problems = []base.Problem
	sv := func(line int64, column, value, reason string) problems {
		return problems{{Table: "supervoxels", Line: line, Column: column, Value: value, Reason: reason}}
	}
	in := func(table string, line int64, column, value, reason string) problems {
		return problems{{Table: table, Line: line, Column: column, Value: value, Reason: reason}}
	}
	const (
		notID    = "is not an id: write a whole number from 0 to 18446744073709551615, digits only"
		floatID  = "is not an id: it went through a floating-point number, which loses digits"
		notCount = "is not a whole number below 2^63"
		notFound = "is not in table supervoxels"
	)
	for name, c := range map[string]struct {
		file, old, with string // old "" replaces the file; with "" then removes it
		want            problems
	}{
		"id too large":         {"supervoxels.csv", "\n13,", "\n18446744073709551616,", sv(4, "supervoxel_id", "18446744073709551616", notID)},
		"id negative":          {"supervoxels.csv", "\n13,", "\n-13,", sv(4, "supervoxel_id", "-13", notID)},
		"id signed":            {"supervoxels.csv", "\n13,", "\n+13,", sv(4, "supervoxel_id", "+13", notID)},
		"id with zeros":        {"supervoxels.csv", "\n13,", "\n013,", sv(4, "supervoxel_id", "013", notID)},
		"id with a space":      {"supervoxels.csv", "\n13,", "\n 13,", sv(4, "supervoxel_id", " 13", notID)},
		"id in words":          {"supervoxels.csv", "\n13,", "\nsoma,", sv(4, "supervoxel_id", "soma", notID)},
		"id as a float":        {"supervoxels.csv", "\n9007199254740993,", "\n9.007199254740992e+15,", sv(2, "supervoxel_id", "9.007199254740992e+15", floatID)},
		"id with a fraction":   {"supervoxels.csv", "\n13,", "\n13.0,", sv(4, "supervoxel_id", "13.0", floatID)},
		"id empty":             {"supervoxels.csv", "\n13,", "\n,", sv(4, "supervoxel_id", "", "is empty")},
		"id twice":             {"supervoxels.csv", "\n41,400,", "\n32,400,", append(sv(21, "supervoxel_id", "32", "is there twice, first on line 16"), in("truth", 22, "supervoxel_id", "41", notFound)...)},
		"segment zero":         {"supervoxels.csv", "\n41,400,", "\n41,0,", sv(21, "segment_id", "0", "is 0, which means background and names nothing")},
		"no voxels":            {"supervoxels.csv", ",4000,5500", ",0,5500", sv(21, "voxel_count", "0", "is not above 0")},
		"negative voxels":      {"supervoxels.csv", ",4000,5500", ",-4,5500", sv(21, "voxel_count", "-4", "is not above 0")},
		"voxels and a half":    {"supervoxels.csv", ",4000,5500", ",4000.5,5500", sv(21, "voxel_count", "4000.5", notCount)},
		"too many voxels":      {"supervoxels.csv", ",4000,5500", ",9223372036854775808,5500", sv(21, "voxel_count", "9223372036854775808", notCount)},
		"voxels beyond reason": {"supervoxels.csv", ",4000,5500", ",9223372036854775807,5500", sv(21, "voxel_count", "9223372036854775807", "brings the voxels of the volume to 2^63 and more")},
		"point not a number":   {"supervoxels.csv", ",5500,5500,3500", ",NaN,5500,3500", sv(21, "x_nm", "NaN", "is not a finite number")},
		"point infinite":       {"supervoxels.csv", ",5500,5500,3500", ",5500,-Inf,3500", sv(21, "y_nm", "-Inf", "is not a finite number")},
		"point beyond doubles": {"supervoxels.csv", ",5500,5500,3500", ",5500,1e999,3500", sv(21, "y_nm", "1e999", "is not a finite number")},
		"point in hexadecimal": {"supervoxels.csv", ",5500,5500,3500", ",5500,0x1p4,3500", sv(21, "y_nm", "0x1p4", "is not a number")},
		"point in words":       {"supervoxels.csv", ",5500,5500,3500", ",5500,5500,deep", sv(21, "z_nm", "deep", "is not a number")},
		"point far away":       {"supervoxels.csv", ",5500,5500,3500", ",5500,5500,3500000000", sv(21, "z_nm", "3.5e+09", "is beyond 1 m")},
		"radius negative":      {"supervoxels.csv", "1060,146", "1060,-146", sv(8, "radius_nm", "-146", "is not a radius in nm")},
		"two at once":          {"supervoxels.csv", "\n13,9223372036854775809,", "\nx,y,", append(sv(4, "supervoxel_id", "x", notID), sv(4, "segment_id", "y", notID)...)},

		"fields missing":          {"contacts.csv", "\n13,14,0.95,110000", "\n13,14,0.95", in("contacts", 4+0, "", "13,14,0.95", "has 3 fields where the header has 4")},
		"fields too many":         {"contacts.csv", "\n13,14,0.95,110000", "\n13,14,0,95,110000", in("contacts", 4, "", "13,14,0,95,110000", "has 5 fields where the header has 4")},
		"quote open":              {"contacts.csv", "\n13,14,0.95,110000", "\n\"13,14,0.95,110000", in("contacts", 4, "", "\"13,14,0.95,110000", "has a quoted field that does not end on its line")},
		"quote within":            {"contacts.csv", "\n13,14,0.95,110000", "\n1\"3,14,0.95,110000", in("contacts", 4, "", "1\"3,14,0.95,110000", "has a quote inside a field that is not quoted")},
		"quote followed":          {"contacts.csv", "\n13,14,0.95,110000", "\n\"13\"4,14,0.95,110000", in("contacts", 4, "", "\"13\"4,14,0.95,110000", "has text after a closing quote")},
		"contact of a stranger":   {"contacts.csv", "\n13,14,", "\n13,4711,", in("contacts", 4, "b_supervoxel_id", "4711", notFound)},
		"contact with itself":     {"contacts.csv", "\n13,14,", "\n13,13,", in("contacts", 4, "b_supervoxel_id", "13", "touches itself: both sides are one supervoxel")},
		"affinity above one":      {"contacts.csv", "\n13,14,0.95", "\n13,14,1.5", in("contacts", 4, "affinity", "1.5", "is not between 0 and 1")},
		"affinity below zero":     {"contacts.csv", "\n13,14,0.95", "\n13,14,-0.01", in("contacts", 4, "affinity", "-0.01", "is not between 0 and 1")},
		"affinity not a number":   {"contacts.csv", "\n13,14,0.95", "\n13,14,nan", in("contacts", 4, "affinity", "nan", "is not a finite number")},
		"affinity empty":          {"contacts.csv", "\n13,14,0.95", "\n13,14,", in("contacts", 4, "affinity", "", "is empty")},
		"area below zero":         {"contacts.csv", "0.95,110000", "0.95,-1", in("contacts", 4, "area_nm2", "-1", "is below 0")},
		"contact contradicted":    {"contacts.csv", "\n14,15,0.97,98000", "\n14,13,0.5,110000", in("contacts", 5, "affinity", "0.5", "contradicts line 4, which is about the same two supervoxels (13 and 14)")},
		"area contradicted":       {"contacts.csv", "\n14,15,0.97,98000", "\n13,14,0.95,98000", in("contacts", 5, "area_nm2", "98000", "contradicts line 4, which is about the same two supervoxels (13 and 14)")},
		"contacts without header": {"contacts.csv", "", " ", problems{{Table: "contacts", Line: 1, Column: "a_supervoxel_id", Reason: "the column is missing"}, {Table: "contacts", Line: 1, Column: "b_supervoxel_id", Reason: "the column is missing"}, {Table: "contacts", Line: 1, Column: "affinity", Reason: "the column is missing"}}},
		"column missing":          {"contacts.csv", ",affinity,", ",belief,", in("contacts", 1, "affinity", "", "the column is missing")},
		"column twice":            {"contacts.csv", ",area_nm2", ",affinity", in("contacts", 1, "affinity", "", "the column is there twice")},
		"table missing":           {"nuclei.csv", "", "", in("nuclei", 0, "", "", "is missing: there is no nuclei.csv, nuclei.csv.gz or nuclei.parquet")},
		"synapse twice":           {"synapses.csv", "\n7002,", "\n7001,", in("synapses", 6, "synapse_id", "7001", "is there twice, first on line 5")},
		"synapse from a stranger": {"synapses.csv", "\n7002,36,", "\n7002,99,", in("synapses", 6, "pre_supervoxel_id", "99", notFound)},
		"synapse onto a stranger": {"synapses.csv", "\n7002,36,35,", "\n7002,36,99,", in("synapses", 6, "post_supervoxel_id", "99", notFound)},
		"confidence above one":    {"synapses.csv", "2500,0.77", "2500,77", in("synapses", 6, "confidence", "77", "is not between 0 and 1")},
		"transmitter too long":    {"synapses.csv", "0.77,gaba", "0.77," + strings.Repeat("g", 101), in("synapses", 6, "transmitter", strings.Repeat("g", 60)+"…", "is not UTF-8 text of at most 100 bytes")},
		"transmitter not text":    {"synapses.csv", "0.77,gaba", "0.77,g\xffba", in("synapses", 6, "transmitter", "g\xffba", "is not UTF-8 text of at most 100 bytes")},
		"nucleus twice":           {"nuclei.csv", "\n18446744073709551615,31", "\n9007199254740993,31", in("nuclei", 4, "nucleus_id", "9007199254740993", "is there twice, first on line 2")},
		"nucleus of a stranger":   {"nuclei.csv", "\n18446744073709551615,31", "\n18446744073709551615,30", in("nuclei", 4, "supervoxel_id", "30", notFound)},
		"nucleus of no volume":    {"nuclei.csv", "980000000", "-1", in("nuclei", 4, "volume_nm3", "-1", "is below 0")},
		"truth twice":             {"truth.csv", "\n41,", "\n36,", in("truth", 22, "supervoxel_id", "36", "is there twice")},
		"truth of a stranger":     {"truth.csv", "\n41,", "\n4711,", in("truth", 22, "supervoxel_id", "4711", notFound)},
		"table in two files":      {"truth.csv.gz", "", "x", in("truth", 0, "", "", "is there twice, as truth.csv and as truth.csv.gz")},
		"supervoxels only header": {"supervoxels.csv", "", "supervoxel_id,segment_id,voxel_count,x_nm,y_nm,z_nm\n", sv(0, "", "", "has no rows")},
		"supervoxels empty":       {"supervoxels.csv", "", "\n", sv(1, "", "", "has no header row")},
		"line without end":        {"truth.csv", "\n41,4\n", "\n41," + strings.Repeat("4", 1<<20), in("truth", 22, "", "", "is longer than 1 MiB; the rest of the table was not read")},
		"description missing":     {"volume.json", "", "", in("volume.json", 0, "", "", "is missing")},
		"description not JSON":    {"volume.json", `"voxel_nm": [8, 8, 40],`, `"voxel_nm": [8, 8, 40;`, in("volume.json", 3, "", "", "cannot be read: invalid character ';' after array element")},
		"description of text":     {"volume.json", "[8, 8, 40]", `"8x8x40"`, in("volume.json", 3, "voxel_nm", "", "cannot be read: json: cannot unmarshal string into Go struct field describe.voxel_nm of type []float64")},
		"name missing":            {"volume.json", `"name": "tiny",`, ``, in("volume.json", 0, "name", "", "is missing")},
		"name unfit":              {"volume.json", `"tiny"`, `"a/b"`, in("volume.json", 0, "name", "a/b", "is not a name: up to 100 letters, digits, dots, dashes and underscores, a letter or digit first")},
		"voxel of two":            {"volume.json", "[8, 8, 40]", "[8, 8]", in("volume.json", 0, "voxel_nm", "[8 8]", "is not three numbers, the size of a voxel along x, y and z")},
		"voxel of nothing":        {"volume.json", "[8, 8, 40]", "[8, 0, 40]", in("volume.json", 0, "voxel_nm", "0", "is not a size in nm above 0")},
		"bounds turned round":     {"volume.json", "[6000, 6000, 4000]", "[6000, -6000, 4000]", in("volume.json", 0, "bounds_nm", "0 to -6000", "does not grow along y, or exceeds 1 m")},
		"bounds missing":          {"volume.json", `"bounds_nm"`, `"bounds"`, in("volume.json", 0, "bounds_nm", "", "is not a box: give min and max with three numbers each")},
		"seam of no axis":         {"volume.json", `{"axis": "z", "at_nm": 2000}`, `{"axis": "w", "at_nm": 2000}`, in("volume.json", 0, "seams.axis", "w", "is not x, y or z")},
		"gap turned round":        {"volume.json", `"from_nm": 3200`, `"from_nm": 3300`, in("volume.json", 0, "gaps.from_nm", "", "from_nm and to_nm are not a stretch")},
		"volume in voxels":        {"volume.json", "[6000, 6000, 4000]", "[75, 75, 10]", sv(2, "", "", "22 of 22 points lie outside bounds_nm, here the first: are these voxels instead of nm, or another volume's?")},
	} {
		t.Run(name, func(t *testing.T) {
			f := tinyFiles(t)
			switch {
			case c.old != "":
				f.swap(t, c.file, c.old, c.with)
			case c.with != "":
				f[c.file] = c.with
			default:
				delete(f, c.file)
			}
			_, err := base.Import(t.Context(), pool, f.write(t), base.ImportOptions{TempDir: t.TempDir()})
			var refusal *base.Refusal
			if !errors.As(err, &refusal) {
				t.Fatalf("got %v, want a refusal", err)
			}
			if diff := gocmp.Diff(c.want, refusal.Problems); diff != "" || refusal.More != 0 {
				t.Errorf("and %d more; (-want +got):\n%s", refusal.More, diff)
			}
			if fault.KindOf(err) != fault.Invalid || fault.CodeOf(err) != "delivery-refused" {
				t.Errorf("it is %s %s", fault.KindOf(err), fault.CodeOf(err))
			}
		})
	}
	if n := stored(t, pool); n != 0 {
		t.Errorf("%d rows stayed behind", n)
	}
}

// TestRefusalNamesTwentyAndCounts: a table that is wrong throughout does not flood.
func TestRefusalNamesTwentyAndCounts(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	f := tinyFiles(t)
	for k := range 30 {
		f["contacts.csv"] += fmt.Sprintf("13,%d,0.5,1\n", 1000+k)
	}
	f.swap(t, "nuclei.csv", "980000000", "-1")
	_, err := base.Import(t.Context(), pool, f.write(t), base.ImportOptions{})
	var refusal *base.Refusal
	if !errors.As(err, &refusal) || len(refusal.Problems) != 20 || refusal.More != 11 {
		t.Fatalf("got %v", err)
	}
	text := err.Error()
	for _, want := range []string{
		"the delivery has 31 problems and nothing of it was stored\n",
		"\n  contacts line 21, b_supervoxel_id \"1000\": is not in table supervoxels\n",
		"\n  and 11 more",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not in\n%s", want, text)
		}
	}
}

// TestDamagedFilesAreRefused: gzip and Parquet files that are cut short or not what they are called.
func TestDamagedFilesAreRefused(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	d := few()
	whole := make(map[string][]byte)
	for _, ending := range []string{".csv.gz", ".parquet"} {
		b, err := os.ReadFile(filepath.Join(d.write(t, ending), "contacts"+ending))
		if err != nil {
			t.Fatal(err)
		}
		whole[ending] = b
	}
	for name, c := range map[string]struct {
		ending  string
		content []byte
		reason  string // its beginning
	}{
		"gzip cut short":    {".csv.gz", whole[".csv.gz"][:len(whole[".csv.gz"])-10], "cannot be read, the file is damaged or cut short: unexpected EOF"},
		"gzip checksum":     {".csv.gz", flip(whole[".csv.gz"], len(whole[".csv.gz"])-6), "cannot be read, the file is damaged or cut short: gzip: invalid checksum"},
		"not gzip":          {".csv.gz", []byte("a_supervoxel_id,b_supervoxel_id,affinity\n"), "is not a gzip file: gzip: invalid header"},
		"empty gzip":        {".csv.gz", nil, "is not a gzip file: EOF"},
		"Parquet cut short": {".parquet", whole[".parquet"][:len(whole[".parquet"])-1], "is not a Parquet file, or a damaged one: "},
		"not Parquet":       {".parquet", []byte("a_supervoxel_id,b_supervoxel_id,affinity\n"), "is not a Parquet file, or a damaged one: "},
		"empty Parquet":     {".parquet", nil, "is not a Parquet file, or a damaged one: "},
		"Parquet page":      {".parquet", flip(whole[".parquet"], 90), "cannot be read, the file is damaged or cut short: column "},
	} {
		t.Run(name, func(t *testing.T) {
			_, err := base.Import(t.Context(), pool, d.with(t, "contacts"+c.ending, c.content), base.ImportOptions{})
			var refusal *base.Refusal
			if !errors.As(err, &refusal) || len(refusal.Problems) != 1 || refusal.Problems[0].Table != "contacts" || !strings.HasPrefix(refusal.Problems[0].Reason, c.reason) {
				t.Errorf("got %v, want %q", err, c.reason)
			}
		})
	}
	// Any single damaged byte is either harmless or refused; nothing crashes.
	for at := 0; at < len(whole[".parquet"]); at += 7 {
		_, err := base.Import(t.Context(), pool, d.with(t, "contacts.parquet", flip(whole[".parquet"], at)), base.ImportOptions{Name: fmt.Sprint("flip-", at)})
		if err != nil && fault.CodeOf(err) != "delivery-refused" {
			t.Errorf("byte %d: %v", at, err)
		}
	}
}

func flip(b []byte, at int) []byte {
	b = slices.Clone(b)
	b[at] ^= 0x55
	return b
}

// few is a delivery of a few rows that is right.
func few() *delivery {
	d := &delivery{description: `{"name": "few", "voxel_nm": [8, 8, 8], "bounds_nm": {"min": [0, 0, 0], "max": [100, 100, 100]}}`}
	for id := range uint64(12) {
		d.supervoxels = append(d.supervoxels, supervoxel{ID: id + 11, Segment: 5, Voxels: 3, X: float64(id)})
		if id > 0 {
			d.contacts = append(d.contacts, contact{A: id + 10, B: id + 11, Affinity: 0.9})
		}
	}
	d.contacts = append(d.contacts, contact{A: 11, B: 22, Affinity: 0.25})
	return d
}

// with writes the delivery with another file of contacts.
func (d *delivery) with(t testing.TB, name string, content []byte) string {
	t.Helper()
	dir := d.write(t, ".csv")
	if err := os.Remove(filepath.Join(dir, "contacts.csv")); err != nil {
		t.Fatal(err)
	}
	put(t, dir, name, content)
	return dir
}

// TestParquetTypesAreChecked: what a reader that fills structs would turn into other ids without a word.
func TestParquetTypesAreChecked(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	for name, c := range map[string]struct {
		content []byte
		want    base.Problem
	}{
		"negative ids": {parquetOf(t, []struct {
			A int64   `parquet:"a_supervoxel_id"`
			B int64   `parquet:"b_supervoxel_id"`
			P float64 `parquet:"affinity"`
		}{{11, 12, 0.5}, {11, -5, 0.5}}), base.Problem{Table: "contacts", Line: 2, Column: "b_supervoxel_id", Value: "-5", Reason: "is below 0: a signed column cannot hold ids from 2^63 on, write it as UINT_64"}},
		"ids as doubles": {parquetOf(t, []struct {
			A uint64  `parquet:"a_supervoxel_id"`
			B float64 `parquet:"b_supervoxel_id"`
			P float64 `parquet:"affinity"`
		}{{11, 12, 0.5}}), base.Problem{Table: "contacts", Column: "b_supervoxel_id", Reason: "is a column of floating-point numbers, which lose digits of ids: write it as UINT_64"}},
		"a null id": {parquetOf(t, []struct {
			A *uint64 `parquet:"a_supervoxel_id,optional"`
			B uint64  `parquet:"b_supervoxel_id"`
			P float32 `parquet:"affinity"`
		}{{nil, 12, 0.5}}), base.Problem{Table: "contacts", Line: 1, Column: "a_supervoxel_id", Reason: "is empty"}},
		"a column missing": {parquetOf(t, []struct {
			A uint64  `parquet:"a_supervoxel_id"`
			P float64 `parquet:"affinity"`
		}{{11, 0.5}}), base.Problem{Table: "contacts", Column: "b_supervoxel_id", Reason: "the column is missing"}},
		"a list": {parquetOf(t, []struct {
			A uint64   `parquet:"a_supervoxel_id"`
			B []uint64 `parquet:"b_supervoxel_id"`
			P float64  `parquet:"affinity"`
		}{{11, []uint64{12}, 0.5}}), base.Problem{Table: "contacts", Column: "b_supervoxel_id", Reason: "is nested or repeated"}},
		"truth values": {parquetOf(t, []struct {
			A uint64 `parquet:"a_supervoxel_id"`
			B uint64 `parquet:"b_supervoxel_id"`
			P bool   `parquet:"affinity"`
		}{{11, 12, true}}), base.Problem{Table: "contacts", Column: "affinity", Reason: "has the type BOOLEAN, which does not suit it"}},
		"LZ4": {parquetOf(t, []contact{{A: 11, B: 12, Affinity: 0.5}}, parquet.Compression(&parquet.Lz4Raw)),
			base.Problem{Table: "contacts", Column: "a_supervoxel_id", Reason: "is compressed with LZ4, which cannot be read reliably: write the file with zstd, snappy or gzip"}},
	} {
		t.Run(name, func(t *testing.T) {
			_, err := base.Import(t.Context(), pool, few().with(t, "contacts.parquet", c.content), base.ImportOptions{})
			var refusal *base.Refusal
			if !errors.As(err, &refusal) {
				t.Fatalf("got %v", err)
			}
			if diff := gocmp.Diff([]base.Problem{c.want}, refusal.Problems); diff != "" {
				t.Errorf("(-want +got):\n%s", diff)
			}
		})
	}
}

// TestParquetTypesThatSuit: signed and narrow integers, single precision and text are read as what they say.
func TestParquetTypesThatSuit(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	dir := few().with(t, "contacts.parquet", parquetOf(t, []struct {
		A string  `parquet:"a_supervoxel_id"`
		B int32   `parquet:"b_supervoxel_id"`
		P float32 `parquet:"affinity"`
		S uint32  `parquet:"area_nm2"`
	}{{"11", 12, 0.5, 100_000}, {"12", 13, 0.75, 3_000_000_000}}))
	b, report := importInto(t, pool, dir, "")
	if report.Info.Contacts != 2 {
		t.Errorf("%d contacts", report.Info.Contacts)
	}
	v, err := b.View(t.Context(), pool, []base.Range{{Lo: 0, Hi: 12}})
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, c := range v.Contacts {
		if c.Area > 2.85e9 || c.Area > 95_000 && c.Area < 105_000 {
			n++
		}
	}
	if n != 2 {
		t.Errorf("the areas come back as %+v", v.Contacts)
	}
}

func parquetOf[T any](t testing.TB, rows []T, options ...parquet.WriterOption) []byte {
	t.Helper()
	var b bytes.Buffer
	w := parquet.NewGenericWriter[T](&b, options...)
	if _, err := w.Write(rows); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// TestOddDeliveriesAreAccepted: what is unusual and usable is read, and said.
func TestOddDeliveriesAreAccepted(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	f := tinyFiles(t)
	f["contacts.csv"] = "\xef\xbb\xbf" + strings.ReplaceAll(f["contacts.csv"], "\n", "\r\n") + "\r\n\r\n14,13,0.95,110000\r\n"
	f.swap(t, "supervoxels.csv", "radius_nm", "radius_nm,made_by")
	f["supervoxels.csv"] = filled(f["supervoxels.csv"])
	f.swap(t, "supervoxels.csv", "5500,5500,3900", "5500,5500,4000.6")
	f.swap(t, "volume.json", `"seams"`, `"made_by": "nobody", "seams"`)
	f["readme.csv"] = "hello"
	f["notes.txt"] = "hello"
	_, report := importInto(t, pool, f.write(t), "odd")
	want := []string{
		`volume.json has a field that is not read: "made_by"`,
		`the file readme.csv is not read: there is no table readme`,
		`supervoxels has a column "made_by" that is not read`,
		`supervoxels has 1 point outside the volume's bounds, of 22, the first on line 22`,
		`contacts begins with a byte-order mark`,
		`contacts has lines that end in CR LF`,
		`1 contact is there more than once with the same values, the first repetition on line 23`,
		`1 base segment is not held together by its contacts, the first is 400; 1 link to the nearest pieces was assumed`,
	}
	if diff := gocmp.Diff(want, report.Warnings); diff != "" {
		t.Errorf("warnings (-want +got):\n%s", diff)
	}
}

// filled gives every row as many fields as the header has.
func filled(table string) string {
	lines := strings.Split(strings.TrimSuffix(table, "\n"), "\n")
	for i, line := range lines {
		lines[i] = line + strings.Repeat(",", strings.Count(lines[0], ",")-strings.Count(line, ","))
	}
	return strings.Join(lines, "\n") + "\n"
}
