package pgserver

import (
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"fettle.example/fettle/internal/fault"
)

// oldest is the first major version that has all that the migrations use.
const oldest = 15

// places are where distributions and macOS packages put the programs.
var places = []string{"/usr/lib/postgresql/*/bin", "/usr/pgsql-*/bin", "/opt/homebrew/opt/postgresql@*/bin", "/usr/local/opt/postgresql@*/bin",
	"/Applications/Postgres.app/Contents/Versions/*/bin"}

// programs finds the folder with initdb and postgres: on the path, in the usual places, newest first, or fetched. Data
// that exists decides the version.
func programs(ctx context.Context, dir, data string, fetch bool) (string, error) {
	store := filepath.Join(dir, "programs")
	major := 0 // any
	if text, err := os.ReadFile(filepath.Join(data, "PG_VERSION")); err == nil {
		if major, err = strconv.Atoi(strings.TrimSpace(string(text))); err != nil {
			return "", fault.Newf(fault.Conflict, "postgres-version", "%s has a version that is no number: %q", data, text)
		}
	}
	found := candidates(store)
	for _, bin := range found {
		if v := version(ctx, bin); v >= oldest && (major == 0 || v == major) {
			return bin, nil
		}
	}
	switch {
	case fetch && (major == 0 || major == pinned.major()):
		return fetched(ctx, store, pinned)
	case major != 0:
		return "", fault.Newf(fault.Conflict, "postgres-version", "%s was made by PostgreSQL %d, and this machine has no programs of that version", data, major).
			WithNext("install PostgreSQL " + strconv.Itoa(major) + ", or move the data with pg_dump")
	case len(found) > 0:
		return "", fault.Newf(fault.NotFound, "postgres-old", "this machine's PostgreSQL in %s is older than version %d", found[0], oldest).
			WithNext("install a newer one, or start with --fetch-postgres")
	}
	return "", fault.New(fault.NotFound, "postgres-missing", "this machine has no PostgreSQL programs").
		WithNext("on Debian: apt-get install postgresql; or start with --fetch-postgres; or give the address of a PostgreSQL with --database")
}

// candidates are the folders that hold the programs, the best first.
func candidates(store string) []string {
	var found []string
	for _, pattern := range places {
		matches, _ := filepath.Glob(pattern)
		found = append(found, matches...)
	}
	slices.SortStableFunc(found, func(a, b string) int { return slices.Compare(numbers(b), numbers(a)) })
	if path, err := exec.LookPath("initdb"); err == nil {
		if real, err := filepath.EvalSymlinks(path); err == nil {
			found = slices.Insert(found, 0, filepath.Dir(real))
		}
	}
	fetchedBefore, _ := filepath.Glob(filepath.Join(store, "*", "bin"))
	found = append(found, fetchedBefore...)
	return slices.DeleteFunc(found, func(bin string) bool { return !isProgram(bin, "initdb") || !isProgram(bin, "postgres") })
}

func isProgram(bin, name string) bool {
	info, err := os.Stat(filepath.Join(bin, name))
	return err == nil && info.Mode().IsRegular() && info.Mode().Perm()&0o111 != 0
}

// numbers are the numbers in a path, so that 15 sorts after 9.6.
func numbers(path string) []int {
	var all []int
	for _, part := range strings.FieldsFunc(path, func(r rune) bool { return r < '0' || r > '9' }) {
		n, _ := strconv.Atoi(part)
		all = append(all, n)
	}
	return all
}

var versionText = regexp.MustCompile(`\(PostgreSQL\) (\d+)`)

// version asks the programs for their major version, 0 when they don't say.
func version(ctx context.Context, bin string) int {
	out, err := exec.CommandContext(ctx, filepath.Join(bin, "postgres"), "--version").Output()
	if err != nil {
		return 0
	}
	m := versionText.FindSubmatch(out)
	if m == nil {
		return 0
	}
	n, _ := strconv.Atoi(string(m[1]))
	return n
}
