package cli

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
)

// login is where a person works and as whom, as kept between commands.
type login struct {
	URL    string `json:"url"`
	Token  string `json:"token"`
	Volume string `json:"volume,omitempty"`
}

// loginPath is the login file of this account.
func loginPath() (string, error) {
	dir, err := os.UserConfigDir()
	if err != nil {
		return "", fault.New(fault.Invalid, "usage", "there is no folder for settings").
			WithNext("set HOME or XDG_CONFIG_HOME, or FETTLE_URL and FETTLE_TOKEN").Wrap(err)
	}
	return filepath.Join(dir, "fettle", "login.json"), nil
}

// readLogin reads the login file; a missing one is an empty login. A file that others can read is refused, because
// the token in it would speak for this person.
func readLogin(path string) (login, error) {
	var l login
	info, err := os.Stat(path)
	if errors.Is(err, fs.ErrNotExist) {
		return l, nil
	}
	if err != nil {
		return l, err
	}
	if info.Mode().Perm()&0o077 != 0 {
		return l, fault.Newf(fault.Forbidden, "login-open", "%s can be read by others (mode %04o), and holds a token", path, info.Mode().Perm()).
			WithNext("chmod 600 " + path + ", and have the token replaced if others use this machine")
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return l, err
	}
	if err := json.Unmarshal(text, &l); err != nil {
		return l, fault.Newf(fault.Invalid, "login-malformed", "%s is not a login file", path).
			WithNext("sign in again: fettle login --url URL").Wrap(err)
	}
	return l, nil
}

// writeLogin replaces the login file whole: a reader sees the old one or the new one, and nobody else ever sees either.
func writeLogin(path string, l login) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
		return err
	}
	text, err := json.MarshalIndent(l, "", "  ")
	if err != nil {
		return err
	}
	f, err := os.CreateTemp(filepath.Dir(path), ".login-*") // made with mode 0600
	if err != nil {
		return err
	}
	defer os.Remove(f.Name()) // nothing is left to remove once it was renamed
	if _, err := f.Write(append(text, '\n')); err != nil {
		f.Close()
		return err
	}
	if err := errors.Join(f.Sync(), f.Close()); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// askToken reads a token without showing it on a terminal, or the first line of standard input elsewhere. It is never
// an argument: other people on the machine can see those.
func (a *app) askToken() (string, error) {
	if f, ok := a.In.(*os.File); ok && term.IsTerminal(int(f.Fd())) {
		fmt.Fprint(a.Err, "token: ")
		b, err := term.ReadPassword(int(f.Fd()))
		fmt.Fprintln(a.Err)
		return strings.TrimSpace(string(b)), err
	}
	line := bufio.NewScanner(a.In)
	line.Scan()
	return strings.TrimSpace(line.Text()), line.Err()
}

func (a *app) loginCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "login --url ADDRESS [--volume NAME]",
		Short: "Keep the server's address and your token for later commands",
		Long: `Ask for a token, try it, and keep it with the server's address (and the volume, if named) in a file that only you
can read. Elsewhere than at a terminal the token is the first line of standard input; FETTLE_TOKEN is taken if set.`,
		Example: `  fettle login --url http://127.0.0.1:7400 --volume cricket-ganglion`,
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			path, err := loginPath()
			if err != nil {
				return err
			}
			kept, _ := readLogin(path) // what cannot be read is about to be replaced
			if a.url = first(a.url, os.Getenv("FETTLE_URL"), kept.URL); a.url == "" {
				return usage("no server is named").WithNext("fettle login --url http://HOST:PORT")
			}
			if a.token = os.Getenv("FETTLE_TOKEN"); a.token == "" {
				if a.token, err = a.askToken(); err != nil {
					return err
				}
			}
			if a.token == "" {
				return usage("no token was given").WithNext("ask a lead for one: fettle token new HANDLE")
			}
			if err := a.dial(); err != nil {
				return err
			}
			me, err := fettle.Read[fettle.Person](a.client.GetMe(cmd.Context()))
			if err != nil {
				return err
			}
			if err := writeLogin(path, login{URL: a.url, Token: a.token, Volume: a.volume}); err != nil {
				return err
			}
			return a.printPerson(me)
		},
	}
}

func (a *app) whoamiCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "whoami",
		Short: "Show who you are to the server, and which server that is",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			me, err := fettle.Read[fettle.Person](a.client.GetMe(cmd.Context()))
			if err != nil {
				return err
			}
			return a.printPerson(me, field{"server", a.url}, field{"volume", a.volume})
		},
	}
}

func (a *app) logoutCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "logout",
		Short: "Forget the kept address and token",
		Args:  cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			path, err := loginPath()
			if err != nil {
				return err
			}
			if err := os.Remove(path); err != nil && !errors.Is(err, fs.ErrNotExist) {
				return err
			}
			return nil
		},
	}
}
