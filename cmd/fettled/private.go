package main

import (
	"context"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
)

// running finds the address of a private PostgreSQL that another fettled has started in a folder, so that a person can
// be added or a volume imported while the server is up. PostgreSQL notes its socket in the fifth line of
// postmaster.pid; the note may be left from a crash, so only an answer counts.
func running(ctx context.Context, dir string) (address string, ok bool) {
	note, err := os.ReadFile(filepath.Join(dir, "data", "postmaster.pid"))
	if err != nil {
		return "", false
	}
	lines := strings.Split(string(note), "\n")
	if len(lines) < 5 || lines[4] == "" {
		return "", false
	}
	q := url.Values{"port": {lines[3]}, "host": {lines[4]}, "user": {"postgres"}}
	address = "postgres:///postgres?" + q.Encode()
	ctx, cancel := context.WithTimeout(ctx, 2*time.Second)
	defer cancel()
	conn, err := pgx.Connect(ctx, address)
	if err != nil {
		return "", false
	}
	return address, conn.Close(ctx) == nil
}
