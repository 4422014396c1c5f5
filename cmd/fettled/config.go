package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/BurntSushi/toml"
	"github.com/spf13/pflag"

	"fettle.example/fettle/internal/fault"
)

// Config is what an operator can set.
type Config struct {
	Database      string // address of a PostgreSQL database; empty: a private one in Data
	Data          string // folder of the private PostgreSQL
	FetchPostgres bool   // may fetch PostgreSQL's programs when the machine has none
	Listen        string // address of the API
	NoWorker      bool   // leave the background work to other processes
	Verbose       bool
}

// settings declares every setting once, as a flag with its default. The environment and the file set the same flags
// where the command line has not, so a value is read and refused in one way wherever it stands.
func (c *Config) settings() *pflag.FlagSet {
	f := pflag.NewFlagSet("settings", pflag.ContinueOnError)
	f.StringVar(&c.Database, "database", "", "address of a PostgreSQL `URL` to use instead of a private one")
	f.StringVar(&c.Data, "data", defaultData(), "folder `DIR` of the private PostgreSQL")
	f.BoolVar(&c.FetchPostgres, "fetch-postgres", false, "fetch a pinned PostgreSQL when this machine has none")
	f.StringVar(&c.Listen, "listen", "127.0.0.1:7400", "`ADDRESS` of the API; port 0 takes a free one")
	f.BoolVar(&c.NoWorker, "no-worker", false, "leave the background work to other processes (fettled work)")
	f.BoolVar(&c.Verbose, "verbose", false, "log details")
	return f
}

// configFile is read when there is one; --config names another, which must exist then.
const configFile = "fettled.toml"

// fill sets the flags that the command line did not: from the environment, then from the file.
func fill(f *pflag.FlagSet, path string, env func(string) (string, bool)) error {
	var first error
	f.VisitAll(func(flag *pflag.Flag) {
		name := "FETTLE_" + strings.ToUpper(strings.ReplaceAll(flag.Name, "-", "_"))
		if name == "FETTLE_DATABASE" {
			name = "FETTLE_DATABASE_URL"
		}
		value, ok := env(name)
		if !ok || value == "" || flag.Changed || first != nil {
			return
		}
		if err := f.Set(flag.Name, value); err != nil {
			first = fault.Newf(fault.Invalid, "config-value", "%s=%q: %v", name, value, err).WithNext("correct the environment")
		}
	})
	if first != nil {
		return first
	}
	return fillFromFile(f, path)
}

func fillFromFile(f *pflag.FlagSet, path string) error {
	named := path != ""
	if !named {
		path = configFile
	}
	var file map[string]any
	_, err := toml.DecodeFile(path, &file)
	switch {
	case errors.Is(err, fs.ErrNotExist) && !named:
		return nil
	case err != nil:
		return fault.Newf(fault.Invalid, "config-unreadable", "%s: %v", path, err).WithNext("correct the file, or name another with --config")
	}
	for key, value := range file {
		flag := f.Lookup(key)
		if flag == nil {
			return fault.Newf(fault.Invalid, "config-key", "%s: there is no setting %q", path, key).WithNext("use one of " + names(f))
		}
		if flag.Changed {
			continue
		}
		if err := f.Set(key, fmt.Sprint(value)); err != nil {
			return fault.Newf(fault.Invalid, "config-value", "%s: %s = %v: %v", path, key, value, err).WithNext("correct the file")
		}
	}
	return nil
}

func names(f *pflag.FlagSet) string {
	var all []string
	f.VisitAll(func(flag *pflag.Flag) { all = append(all, flag.Name) })
	return strings.Join(all, ", ")
}

// defaultData is where a service keeps its data; for an account that is not root, where a program of that account
// does (XDG base directories).
func defaultData() string {
	if os.Geteuid() == 0 {
		return "/var/lib/fettle"
	}
	if dir := os.Getenv("XDG_DATA_HOME"); dir != "" {
		return filepath.Join(dir, "fettle")
	}
	home, err := os.UserHomeDir()
	if err != nil {
		return "fettle-data"
	}
	return filepath.Join(home, ".local", "share", "fettle")
}
