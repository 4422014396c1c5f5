package base

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
)

// importer is one import under way.
type importer struct {
	ctx      context.Context
	dir, tmp string
	opt      ImportOptions
	problems problems
	warnings []string
	files    map[string]string // path by table
	info     Info

	sv           *supervoxels
	contacts     *sorter[contactRecord]
	edges        *sorter[treeEdge]
	halves       *sorter[halfRecord]
	synapses     *sorter[synapseRecord]
	transmitters []string
	nuclei       []nucleusRecord
	truth        *truths // by rank
	layout       *layout
	segments     []segmentRecord // by number
}

// Import reads a delivery and stores it as a new volume. A delivery that is not right is refused whole with a
// *Refusal; a name that is taken is fault.Conflict "volume-exists". Whatever ends it early, a cancelled context, a lost
// connection or a killed process, nothing stays behind but files that the next import removes, and it can be run again.
//
// Memory: some 150 bytes a supervoxel and 150 MB; contacts and synapses are sorted in files.
func Import(ctx context.Context, pool *pgxpool.Pool, dir string, opt ImportOptions) (*Report, error) {
	began := time.Now()
	im := &importer{ctx: ctx, dir: dir, opt: opt}
	tmp, err := newTempDir(opt.TempDir)
	if err != nil {
		return nil, err
	}
	defer tmp.remove()
	im.tmp = tmp.path
	for _, step := range []func() error{im.describe, func() error { return im.refuseTaken(pool) }, im.read, im.arrange} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	if err := im.store(pool); err != nil {
		return nil, err
	}
	im.progress("done", 1, 1, "")
	return &Report{Info: im.info, Warnings: im.warnings, Elapsed: time.Since(began)}, nil
}

func (im *importer) warnf(format string, args ...any) {
	im.warnings = append(im.warnings, fmt.Sprintf(format, args...))
}

func (im *importer) progress(stage string, done, total int64, unit string) {
	if im.opt.Progress != nil {
		im.opt.Progress(Progress{stage, done, total, unit})
	}
}

// batchesTold is how many batches of rows go by between two words of progress.
const batchesTold = 16

// lookUp is how many records go by between two looks at the context.
const lookUp = 1 << 14

// alive ends work that nobody waits for.
func (im *importer) alive(n int) error {
	if n%lookUp != 0 {
		return nil
	}
	return im.ctx.Err()
}

// describe reads volume.json and finds the tables.
func (im *importer) describe() error {
	entries, err := os.ReadDir(im.dir)
	if err != nil {
		return fault.Newf(fault.Invalid, "delivery-unreadable", "the folder %s cannot be read", im.dir).
			WithNext("name the folder that holds volume.json and the tables").Wrap(err)
	}
	if im.info, err = readDescription(im.dir, im.opt.Name, &im.problems, func(s string) { im.warnf("%s", s) }); err != nil {
		return err
	}
	im.files = make(map[string]string)
	for _, e := range entries {
		im.findTable(e.Name())
	}
	for _, t := range tables {
		if im.files[t.name] == "" && !t.optional {
			im.problems.add(t.name, 0, "", "", fmt.Sprintf("is missing: there is no %[1]s.csv, %[1]s.csv.gz or %[1]s.parquet", t.name))
		}
	}
	return nil
}

// endings of table files.
var endings = []string{".csv", ".csv.gz", ".parquet"}

func (im *importer) findTable(file string) {
	for _, ending := range endings {
		name, is := strings.CutSuffix(file, ending)
		if !is {
			continue
		}
		switch {
		case tableOrder(name) < 0:
			im.warnf("the file %s is not read: there is no table %s", file, name)
		case im.files[name] != "":
			im.problems.add(name, 0, "", "", fmt.Sprintf("is there twice, as %s and as %s", filepath.Base(im.files[name]), file))
		default:
			im.files[name] = filepath.Join(im.dir, file)
		}
	}
}

// read reads and checks all tables; a *Refusal when anything is wrong.
func (im *importer) read() (err error) {
	if im.sv, err = im.readSupervoxels(); err != nil {
		return err
	}
	if im.sv.len() == 0 && !im.problems.any() {
		im.problems.add(supervoxelTable.name, 0, "", "", "has no rows")
	}
	for _, step := range []func() error{im.readContacts, im.judgeContacts, im.readSynapses, im.readNuclei, im.readTruth} {
		if err := step(); err != nil {
			return err
		}
	}
	return im.problems.refusal()
}

// each calls fn with every row of a table, unless the table cannot be read at all. A row's faults are noted before.
func (im *importer) each(t *table, fn func(*row) error) error {
	path := im.files[t.name]
	if path == "" {
		return nil
	}
	src, err := im.open(path, t)
	if src == nil || err != nil {
		return err
	}
	total := int64(0)
	if st, err := os.Stat(path); err == nil {
		total = st.Size()
	}
	ahead := readAhead(src, len(t.columns))
	defer ahead.stop()
	for n := 0; ; n++ {
		rows, done := ahead.next()
		if rows == nil {
			break
		}
		if n%batchesTold == 0 {
			im.progress("reading "+t.name, done, total, "bytes")
		}
		if err := im.ctx.Err(); err != nil {
			return err
		}
		for i := range rows {
			for _, f := range rows[i].faults {
				im.problems.add(t.name, rows[i].line, t.columnName(f.column), f.value, f.reason)
			}
			if err := fn(&rows[i]); err != nil {
				return err
			}
		}
	}
	im.warnings = append(im.warnings, ahead.odd()...)
	im.progress("reading "+t.name, total, total, "bytes")
	return im.ctx.Err()
}

// open opens a table; nil when it cannot be read at all, and the problems are noted.
func (im *importer) open(path string, t *table) (source, error) {
	warn := func(s string) { im.warnf("%s", s) }
	if strings.HasSuffix(path, ".parquet") {
		if s, err := openParquet(path, t, &im.problems, warn); s != nil || err != nil {
			return s, err
		}
		return nil, nil
	}
	if s, err := openCSV(path, t, &im.problems, warn); s != nil || err != nil {
		return s, err
	}
	return nil, nil
}
