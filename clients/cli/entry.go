package cli

import (
	"fmt"
	"net/http"
	"strings"

	"github.com/google/uuid"
	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) entriesCommand() *cobra.Command {
	var person, kind string
	var task, after, before int64
	var oldest bool
	var limit int
	cmd := &cobra.Command{
		Use:   "entries",
		Short: "List entries of the ledger, newest first",
		Example: `  fettle entries --person birch --limit 20
  fettle entries --oldest --limit 0 -o csv > ledger.csv`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			p := fettle.ListEntriesParams{Person: optional(person), Kind: optional(fettle.EntryKind(kind)),
				After: optional(after), Before: optional(before), Order: optional("newest")}
			if oldest {
				p.Order = optional("oldest")
			}
			if task > 0 {
				t, err := fettle.Read[fettle.Task](a.client.GetTask(cmd.Context(), name, task))
				if err != nil {
					return err
				}
				p.Task = &t.Id
			}
			entries, err := every[fettle.Entry](limit, func(cursor *string, n *int) (*http.Response, error) {
				p.Cursor, p.Limit = cursor, n
				return a.client.ListEntries(cmd.Context(), name, &p)
			})
			if err != nil {
				return err
			}
			return a.printEntries(entries)
		},
	}
	f := cmd.Flags()
	f.StringVar(&person, "person", "", "posted by `HANDLE`")
	f.StringVar(&kind, "kind", "", "`KIND`: merge, split or reversal")
	f.Int64Var(&task, "task", 0, "posted for the task of this `NUMBER`")
	f.Int64Var(&after, "after", 0, "above this `POSITION`")
	f.Int64Var(&before, "before", 0, "below this `POSITION`")
	f.BoolVar(&oldest, "oldest", false, "oldest first")
	f.IntVar(&limit, "limit", 50, "at most so many (0: all)")
	_ = cmd.RegisterFlagCompletionFunc("kind", cobra.FixedCompletions([]string{"merge", "split", "reversal"}, cobra.ShellCompDirectiveNoFileComp))
	return cmd
}

func (a *app) printEntries(entries []fettle.Entry) error {
	return list(a, entries,
		right("position", func(e fettle.Entry) string { return fmt.Sprint(e.Position) }),
		left("at", func(e fettle.Entry) string { return a.when(e.At) }),
		left("person", func(e fettle.Entry) string { return e.Person }),
		left("kind", func(e fettle.Entry) string { return string(e.Kind) }),
		left("before", func(e fettle.Entry) string { return strings.Join(e.Before, " ") }),
		left("after", func(e fettle.Entry) string { return strings.Join(e.After, " ") }),
		right("reverses", func(e fettle.Entry) string { return positive(has(e.Reverses)) }),
		left("reason", func(e fettle.Entry) string { return e.Reason }))
}

func (a *app) entryCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "entry POSITION",
		Short: "Show one entry whole, with the bytes that were hashed",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			position, err := parseNumber(args[0], "a position")
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			e, err := fettle.Read[fettle.Entry](a.client.GetEntry(cmd.Context(), name, position))
			if err != nil {
				return err
			}
			return record(a, e, append(entryFields(a, e), field{"content", has(e.Content)})...)
		},
	}
}

// printEntry shows an entry that was just posted.
func (a *app) printEntry(e fettle.Entry) error { return record(a, e, entryFields(a, e)...) }

func entryFields(a *app, e fettle.Entry) []field {
	task := ""
	if e.Task != nil && *e.Task != uuid.Nil {
		task = e.Task.String()
	}
	cost := ""
	if e.Cost != nil {
		cost = fixed(*e.Cost, 2) + " (log-odds)"
	}
	var seeds []string
	for _, group := range has(e.Seeds) {
		seeds = append(seeds, strings.Join(group, ","))
	}
	return []field{
		{"position", fmt.Sprint(e.Position)}, {"kind", string(e.Kind)}, {"person", e.Person}, {"agent", has(e.Agent)},
		{"at", a.when(e.At)}, {"task", task}, {"reason", e.Reason}, {"reverses", positive(has(e.Reverses))},
		{"before", strings.Join(e.Before, " ")}, {"after", strings.Join(e.After, " ")}, {"seeds", strings.Join(seeds, " | ")},
		{"joined", edges(e.Joined)}, {"cut", edges(e.Cut)}, {"cost", cost},
		{"entry id", e.Id.String()}, {"leaf hash", e.LeafHash},
	}
}

// edges lists pairs of supervoxels: contacts as a-b, links that people made as a=b.
func edges(e fettle.Edges) string {
	var out []string
	for _, p := range e.Contacts {
		out = append(out, strings.Join(p, "-"))
	}
	for _, p := range e.Links {
		out = append(out, strings.Join(p, "="))
	}
	return strings.Join(out, " ")
}

// positive writes a number that is there.
func positive(n int64) string {
	if n == 0 {
		return ""
	}
	return fmt.Sprint(n)
}
