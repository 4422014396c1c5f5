package cli

import (
	"context"
	"fmt"
	"io"
	"net/http"
	"os"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) ledgerCommand() *cobra.Command {
	return noun("ledger", "Vouch for the ledger, take it along and verify it",
		a.ledgerKeyCommand(), a.ledgerCheckpointCommand(), a.ledgerProveCommand(), a.ledgerExportCommand(), a.ledgerVerifyCommand())
}

func (a *app) ledgerKeyCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "key",
		Short: "Show the public key that checkpoints are checked with",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			k, err := fettle.Read[fettle.CheckpointKey](a.client.GetCheckpointKey(cmd.Context(), name))
			if err != nil {
				return err
			}
			return a.printText(k, k.Key+"\n")
		},
	}
}

func (a *app) ledgerCheckpointCommand() *cobra.Command {
	var sign bool
	cmd := &cobra.Command{
		Use:   "checkpoint",
		Short: "Show the newest signed checkpoint, to be kept",
		Long: `Show the newest signed checkpoint: a few lines that stand for every entry up to a position. Keep them where nobody who
runs the server can change them; later, fettle ledger verify --since tells whether those entries are still the same.`,
		Example: `  fettle ledger checkpoint --make > checkpoint-2026-12.txt`,
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			ask := a.client.GetCheckpoint
			if sign {
				ask = a.client.MakeCheckpoint
			}
			c, err := fettle.Read[fettle.Checkpoint](ask(cmd.Context(), name))
			if err != nil {
				return err
			}
			return a.printText(c, c.Note)
		},
	}
	cmd.Flags().BoolVar(&sign, "make", false, "sign what there is now first")
	return cmd
}

// printText prints what is text already, or the answer that it came in.
func (a *app) printText(answer any, text string) error {
	if a.output == asJSON {
		return writeJSON(a.Out, answer)
	}
	_, err := io.WriteString(a.Out, text)
	return err
}

func (a *app) ledgerExportCommand() *cobra.Command {
	var file string
	var prov bool
	cmd := &cobra.Command{
		Use:   "export",
		Short: "Write the whole ledger as JSON Lines, which fettle ledger verify checks without a server",
		Long: `Write the whole ledger as JSON Lines: a header, the canonical bytes of each entry with their hash, and the signed checkpoints.
With --prov, tell instead who made which segments of which, as a PROV-JSON document (W3C PROV) for other programs.

Both name people: treat them as personal data.`,
		Example: `  fettle ledger export --file cricket-ganglion.jsonl
  fettle ledger export --prov --file cricket-ganglion.prov.json`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) (err error) {
			ask := a.ledgerLines
			if prov {
				ask = a.provenance
			}
			body, err := a.streamed(cmd, ask)
			if err != nil {
				return err
			}
			defer body.Close()
			if file == "" {
				_, err = io.Copy(a.Out, body)
				return err
			}
			return saveTo(file, body)
		},
	}
	cmd.Flags().BoolVar(&prov, "prov", false, "as PROV-JSON")
	cmd.Flags().StringVar(&file, "file", "", "write to `FILE`, which must not exist yet")
	return cmd
}

// saveTo writes a new file, and leaves none behind that is not whole.
func saveTo(file string, r io.Reader) error {
	f, err := os.OpenFile(file, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return usage("%v", err).WithNext("name a file that does not exist yet")
	}
	_, err = io.Copy(f, r)
	if closed := f.Close(); err == nil {
		err = closed
	}
	if err != nil {
		os.Remove(file) //nolint:errcheck // the first error counts
	}
	return err
}

func (a *app) ledgerLines(ctx context.Context, volume string) (*http.Response, error) {
	return a.client.ExportLedger(ctx, volume)
}

func (a *app) provenance(ctx context.Context, volume string) (*http.Response, error) {
	return a.client.GetProvenance(ctx, volume)
}

// streamed asks for something about the volume that is read as it comes.
func (a *app) streamed(cmd *cobra.Command, ask func(context.Context, string) (*http.Response, error)) (io.ReadCloser, error) {
	name, err := a.volumeName(cmd.Context())
	if err != nil {
		return nil, err
	}
	resp, err := ask(cmd.Context(), name)
	if err != nil {
		return nil, err
	}
	if resp.StatusCode >= 300 {
		defer resp.Body.Close()
		body, err := io.ReadAll(resp.Body)
		if err != nil {
			return nil, err
		}
		return nil, fettle.Failure(resp, body)
	}
	return resp.Body, nil
}

func (a *app) ledgerProveCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "prove POSITION",
		Short: "Show and check the proof that an entry is in the ledger",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			position, err := parseNumber(args[0], "a position")
			if err != nil {
				return err
			}
			p, err := a.proven(cmd, position)
			if err != nil {
				return err
			}
			fields := []field{{"position", fmt.Sprint(position)}, {"size", fmt.Sprint(p.Size)}, {"root", p.Root}}
			for _, h := range p.Path {
				fields = append(fields, field{"path", h})
			}
			return record(a, p, fields...)
		},
	}
}
