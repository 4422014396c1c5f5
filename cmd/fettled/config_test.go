package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fettle.example/fettle/internal/fault"
)

// environment is a set of variables in place of the process's own.
func environment(pairs map[string]string) func(string) (string, bool) {
	return func(name string) (string, bool) { v, ok := pairs[name]; return v, ok }
}

func configured(t *testing.T, args []string, env map[string]string, file string) (Config, error) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "fettled.toml")
	if err := os.WriteFile(path, []byte(file), 0o600); err != nil {
		t.Fatal(err)
	}
	var c Config
	f := c.settings()
	if err := f.Parse(args); err != nil {
		t.Fatal(err)
	}
	return c, fill(f, path, environment(env))
}

func TestFlagBeatsEnvironmentBeatsFileBeatsDefault(t *testing.T) {
	file := "listen = \"file:1\"\ndata = \"file\"\nno-worker = true\n"
	env := map[string]string{"FETTLE_LISTEN": "env:1", "FETTLE_DATABASE_URL": "postgres://env", "FETTLE_DATA": ""}
	c, err := configured(t, []string{"--listen", "flag:1"}, env, file)
	if err != nil {
		t.Fatal(err)
	}
	if c.Listen != "flag:1" || c.Database != "postgres://env" || c.Data != "file" || !c.NoWorker || c.FetchPostgres {
		t.Errorf("got %+v", c)
	}
	c, err = configured(t, nil, env, file)
	if err != nil || c.Listen != "env:1" {
		t.Errorf("got %+v, %v", c, err)
	}
	c, err = configured(t, nil, nil, "")
	if err != nil || c.Listen != "127.0.0.1:7400" || c.Data != defaultData() {
		t.Errorf("got %+v, %v", c, err)
	}
}

func TestMistypedSettingsAreRefused(t *testing.T) {
	for _, c := range []struct {
		file string
		env  map[string]string
		code string
		says string
	}{
		{file: "lisen = \"x\"", code: "config-key", says: `"lisen"`},
		{file: "no-worker = \"perhaps\"", code: "config-value", says: "no-worker"},
		{file: "listen = ", code: "config-unreadable", says: "fettled.toml"},
		{env: map[string]string{"FETTLE_NO_WORKER": "perhaps"}, code: "config-value", says: "FETTLE_NO_WORKER"},
	} {
		_, err := configured(t, nil, c.env, c.file)
		if fault.CodeOf(err) != c.code || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%q %v: %v", c.file, c.env, err)
		}
	}
}

func TestAFileThatIsNamedMustExist(t *testing.T) {
	var c Config
	f := c.settings()
	if err := fill(f, filepath.Join(t.TempDir(), "none.toml"), environment(nil)); fault.CodeOf(err) != "config-unreadable" {
		t.Errorf("got %v", err)
	}
}
