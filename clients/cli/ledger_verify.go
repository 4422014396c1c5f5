package cli

import (
	"fmt"
	"io"
	"os"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/proof"
)

func (a *app) ledgerVerifyCommand() *cobra.Command {
	var since, key, digest string
	cmd := &cobra.Command{
		Use:   "verify FILE|live",
		Short: "Check every byte of an export, or of the ledger as the server has it",
		Long: `Check every byte of an export, or of the ledger as the server has it: order, hashes, the base that each entry is about,
signatures, and with --since that nothing changed which an older checkpoint covers. A file needs no server. What is wrong is named,
and the exit code is then 4.

Whoever has the database can also sign. Only what you kept yourself tells a rewritten ledger from a true one: the key, the base's
digest and a checkpoint.`,
		Example: `  fettle ledger verify cricket-ganglion.jsonl --since checkpoint-2026-11.txt
  fettle ledger verify live --since checkpoint-2026-11.txt --key 'fettle.example/…'`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			expect := proof.Expect{Key: key, Digest: digest}
			if since != "" {
				kept, err := os.ReadFile(since)
				if err != nil {
					return unreadable(err)
				}
				expect.Since = kept
			}
			in, err := a.opened(cmd, args[0])
			if err != nil {
				return err
			}
			defer in.Close()
			r, err := proof.VerifyLog(in, expect)
			if err != nil {
				return err
			}
			return a.printVerified(r)
		},
	}
	f := cmd.Flags()
	f.StringVar(&since, "since", "", "a checkpoint that you kept, in `FILE`")
	f.StringVar(&key, "key", "", "the public `KEY` that you know")
	f.StringVar(&digest, "base", "", "the base's `DIGEST` that you know")
	return cmd
}

// opened is the export in a file, or the one that the server makes now.
func (a *app) opened(cmd *cobra.Command, where string) (io.ReadCloser, error) {
	if where == "live" {
		return a.streamed(cmd, a.ledgerLines)
	}
	f, err := os.Open(where)
	if err != nil {
		return nil, unreadable(err)
	}
	return f, nil
}

func unreadable(err error) error {
	return fault.Newf(fault.NotFound, "file-unreadable", "%v", err).WithNext("name a file that can be read")
}

func (a *app) printVerified(r *proof.LogReport) error {
	fields := []field{{"volume", r.Header.Volume.Name}, {"base", r.Header.Volume.Digest}, {"entries verified", fmt.Sprint(r.Head.Size)},
		{"root", r.Head.Root.String()}, {"checkpoints", fmt.Sprint(r.Checkpoints)}, {"key", r.Header.Key}}
	if r.Since > 0 {
		fields = append(fields, field{"unchanged since", fmt.Sprintf("the checkpoint of %d entries", r.Since)})
	}
	return record(a, r, fields...)
}

// proven asks for an entry, a checkpoint and the proof that the one is in the other, and believes none of it before it is checked.
func (a *app) proven(cmd *cobra.Command, position int64) (p fettle.Proof, err error) {
	ctx := cmd.Context()
	name, err := a.volumeName(ctx)
	if err != nil {
		return p, err
	}
	e, err := fettle.Read[fettle.Entry](a.client.GetEntry(ctx, name, position))
	if err != nil {
		return p, err
	}
	c, err := fettle.Read[fettle.Checkpoint](a.client.MakeCheckpoint(ctx, name))
	if err != nil {
		return p, err
	}
	k, err := fettle.Read[fettle.CheckpointKey](a.client.GetCheckpointKey(ctx, name))
	if err != nil {
		return p, err
	}
	p, err = fettle.Read[fettle.Proof](a.client.ProveInclusion(ctx, name, &fettle.ProveInclusionParams{Position: position, Size: &c.Size}))
	if err != nil {
		return p, err
	}
	return p, checkProof(p, name, position, has(e.Content), c.Note, k.Key)
}

func checkProof(p fettle.Proof, volume string, position int64, content, note, key string) error {
	verifier, err := proof.Verifier(key)
	if err != nil {
		return err
	}
	head, err := proof.Open([]byte(note), proof.Origin(volume), verifier)
	if err != nil {
		return err
	}
	path := make([]proof.Hash, len(p.Path))
	for i, h := range p.Path {
		if err := path[i].UnmarshalText([]byte(h)); err != nil {
			return err
		}
	}
	return proof.CheckInclusion(path, position-1, head.Size, proof.LeafHash([]byte(content)), head.Root)
}
