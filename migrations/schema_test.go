package migrations_test

import (
	"bytes"
	"flag"
	"os"
	osexec "os/exec"
	"path/filepath"
	"regexp"
	"testing"

	"fettle.example/fettle/internal/pgtest"
)

var update = flag.Bool("update", false, "rewrite schema.sql")

// TestSchemaIsTheOneToReview dumps a migrated database and holds it against schema.sql, so that a change of the tables shows as a
// change of one file that a reviewer can read from top to bottom.
func TestSchemaIsTheOneToReview(t *testing.T) {
	cmd := osexec.Command(dumper(t), "--schema-only", "--no-owner", "--no-privileges", "--schema=public", "--dbname="+pgtest.URL(t))
	var said bytes.Buffer
	cmd.Stderr = &said
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("pg_dump: %v: %s", err, said.String())
	}
	got := tidy(out)
	if *update {
		if err := os.WriteFile("schema.sql", got, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile("schema.sql")
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Error("the tables are not those of schema.sql: read what changed, then go test ./migrations -update")
	}
}

// dumper finds pg_dump: on the path, else beside the server's programs.
func dumper(t *testing.T) string {
	t.Helper()
	if path, err := osexec.LookPath("pg_dump"); err == nil {
		return path
	}
	found, _ := filepath.Glob("/usr/lib/postgresql/*/bin/pg_dump")
	if len(found) == 0 {
		t.Fatal("this test needs pg_dump: on Debian, apt-get install postgresql")
	}
	return found[len(found)-1]
}

// tidy leaves out what differs from one PostgreSQL to the next: comments, settings, and psql's own commands.
func tidy(dump []byte) []byte {
	for _, line := range []string{`(?m)^--.*\n`, `(?m)^SET .*\n`, `(?m)^SELECT pg_catalog\..*\n`, `(?m)^\\.*\n`, `(?m)^(CREATE|COMMENT ON) SCHEMA public.*\n`} {
		dump = regexp.MustCompile(line).ReplaceAll(dump, nil)
	}
	return append(bytes.TrimSpace(regexp.MustCompile(`\n{3,}`).ReplaceAll(dump, []byte("\n\n"))), '\n')
}
