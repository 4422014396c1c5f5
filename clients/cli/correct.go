package cli

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"fettle.example/fettle/clients/fettle"
)

// correction is what the commands that change segments share.
type correction struct {
	expect  []string
	reason  string
	preview bool
	yes     bool
}

// flags adds the shared flags to a command.
func (c *correction) flags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.StringSliceVar(&c.expect, "expect", nil, "the `SEGMENTS` you saw (default: those that the preview shows)")
	f.StringVar(&c.reason, "reason", "", "why; it stands in the ledger for ever")
	f.BoolVar(&c.preview, "preview", false, "say what it would do, and post nothing")
	f.BoolVarP(&c.yes, "yes", "y", false, "post without asking")
}

// because is the reason as the API takes it.
func (c *correction) because() *string { return optional(c.reason) }

// agreed asks whether what was shown is to be posted. Without a terminal to ask at, --yes is needed.
func (a *app) agreed(c *correction, question string) error {
	if c.yes {
		return nil
	}
	f, ok := a.In.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return usage("there is no terminal to ask at").WithNext("add --yes to post, or --preview to look only")
	}
	fmt.Fprintf(a.Err, "%s [y/N] ", question)
	answer, err := bufio.NewReader(a.In).ReadString('\n')
	if err != nil && err != io.EOF {
		return err
	}
	if w := strings.ToLower(strings.TrimSpace(answer)); w != "y" && w != "yes" {
		return errors.New("not posted")
	}
	return nil
}

func (a *app) mergeCommand() *cobra.Command {
	var c correction
	cmd := &cobra.Command{
		Use:   "merge A B",
		Short: "Join the segments of two supervoxels, after a look at what comes out",
		Long: `Join the segments of two supervoxels by a link between them. A and B are supervoxel ids, or points @x,y,z in nm,
which stand for the nearest supervoxel.`,
		Example: `  fettle merge 33 34 --reason "the axon runs on across the seam"`,
		Args:    cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			req, err := a.mergeRequest(cmd.Context(), args[0], args[1], &c)
			if err != nil {
				return err
			}
			p, err := a.previewMerge(cmd.Context(), name, *req, &c)
			if err != nil || c.preview {
				return err
			}
			if err := a.agreed(&c, "join them?"); err != nil {
				return err
			}
			// Points were looked up for the preview: what is posted is what was shown.
			req.A, req.B = fettle.Seed{Supervoxel: &p.A}, fettle.Seed{Supervoxel: &p.B}
			e, err := fettle.Read[fettle.Entry](a.client.PostMerge(cmd.Context(), name, &fettle.PostMergeParams{IdempotencyKey: newKey().String()}, *req))
			if err != nil {
				return err
			}
			return a.printEntry(e)
		},
	}
	c.flags(cmd)
	return cmd
}

// mergeRequest makes the request, and asks for the segments to expect when none are named.
func (a *app) mergeRequest(ctx context.Context, wordA, wordB string, c *correction) (*fettle.MergeRequest, error) {
	seeds := make([]seed, 2)
	for i, word := range []string{wordA, wordB} {
		var err error
		if seeds[i], err = parseSeed(word); err != nil {
			return nil, err
		}
	}
	expect, err := a.expected(ctx, c, seeds)
	if err != nil {
		return nil, err
	}
	return &fettle.MergeRequest{A: seeds[0].api(), B: seeds[1].api(), Expected: expect, Reason: c.because()}, nil
}

// expected are the segments that a correction names as seen: those of --expect, else the present ones of its seeds,
// which the preview then shows.
func (a *app) expected(ctx context.Context, c *correction, seeds []seed) ([]string, error) {
	if len(c.expect) > 0 {
		return parseIDs(c.expect)
	}
	var ids, segments []string
	for _, s := range seeds {
		if s.point == nil {
			ids = append(ids, s.id)
			continue
		}
		near, err := fettle.Read[fettle.Nearest](a.client.GetNearest(ctx, a.volume,
			&fettle.GetNearestParams{X: s.point[0], Y: s.point[1], Z: s.point[2]}))
		if err != nil {
			return nil, err
		}
		segments = append(segments, near.Segment)
	}
	if len(ids) > 0 {
		items, err := listOf[fettle.LookupItem](a.client.LookUp(ctx, a.volume, fettle.LookupRequest{Supervoxels: ids}))
		if err != nil {
			return nil, err
		}
		for _, i := range items {
			segments = append(segments, i.Segment)
		}
	}
	slices.Sort(segments)
	return slices.Compact(segments), nil
}

func (a *app) splitCommand() *cobra.Command {
	var c correction
	var groups []string
	cmd := &cobra.Command{
		Use:   "split --group SEEDS --group SEEDS",
		Short: "Divide a segment between two groups of seeds, after a look at the sides",
		Long: `Divide a segment by the minimum cut between two groups of seeds. A seed is a supervoxel id, or a point @x,y,z in
nm, which stands for the nearest supervoxel; seeds of a group stand together with commas.`,
		Example: `  fettle split --group 13,14 --group 24,25 --preview
  fettle split --group @2200,1020,1040 --group @2240,2200,1060 --reason "two cells cross here"`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			req, err := a.splitRequest(cmd.Context(), groups, &c)
			if err != nil {
				return err
			}
			p, err := a.previewSplit(cmd.Context(), name, *req, &c)
			if err != nil || c.preview {
				return err
			}
			if err := a.agreed(&c, "divide it so?"); err != nil {
				return err
			}
			req.Groups = bySupervoxel(p.Groups)
			e, err := fettle.Read[fettle.Entry](a.client.PostSplit(cmd.Context(), name, &fettle.PostSplitParams{IdempotencyKey: newKey().String()}, *req))
			if err != nil {
				return err
			}
			return a.printEntry(e)
		},
	}
	c.flags(cmd)
	addGroups(cmd, &groups)
	return cmd
}

// addGroups gives a command the seeds of a split: StringArray, because commas part seeds and not groups.
func addGroups(cmd *cobra.Command, groups *[]string) {
	cmd.Flags().StringArrayVar(groups, "group", nil, "`SEEDS` of one side: ids or @x,y,z, with commas; give it twice")
}

func (a *app) splitRequest(ctx context.Context, words []string, c *correction) (*fettle.SplitRequest, error) {
	if len(words) != 2 {
		return nil, usage("a split takes two groups of seeds, not %d", len(words)).WithNext("give --group twice, once for each side")
	}
	req := &fettle.SplitRequest{Reason: c.because()}
	var all []seed
	for _, word := range words {
		group, err := parseGroup(word)
		if err != nil {
			return nil, err
		}
		var seeds []fettle.Seed
		for _, s := range group {
			seeds = append(seeds, s.api())
		}
		req.Groups, all = append(req.Groups, seeds), append(all, group...)
	}
	var err error
	req.Expected, err = a.expected(ctx, c, all)
	return req, err
}

func (a *app) reverseCommand() *cobra.Command {
	var c correction
	cmd := &cobra.Command{
		Use:   "reverse POSITION",
		Short: "Undo one entry by another; nothing is erased",
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
			undone, err := fettle.Read[fettle.Entry](a.client.GetEntry(cmd.Context(), name, position))
			if err != nil {
				return err
			}
			if err := a.foresee(&c, undone, entryFields(a, undone)); err != nil || c.preview {
				return err
			}
			if err := a.agreed(&c, "undo it?"); err != nil {
				return err
			}
			expect := undone.After
			if len(c.expect) > 0 {
				if expect, err = parseIDs(c.expect); err != nil {
					return err
				}
			}
			e, err := fettle.Read[fettle.Entry](a.client.PostReversal(cmd.Context(), name,
				&fettle.PostReversalParams{IdempotencyKey: newKey().String()},
				fettle.ReversalRequest{Position: position, Expected: expect, Reason: c.because()}))
			if err != nil {
				return err
			}
			return a.printEntry(e)
		},
	}
	c.flags(cmd)
	return cmd
}

// api is a seed as the API takes it.
func (s seed) api() fettle.Seed {
	if s.point != nil {
		p := fettle.Point(s.point[:])
		return fettle.Seed{PointNm: &p}
	}
	return fettle.Seed{Supervoxel: &s.id}
}

// bySupervoxel are groups of supervoxels as seeds.
func bySupervoxel(groups []fettle.IDs) [][]fettle.Seed {
	out := make([][]fettle.Seed, len(groups))
	for i, g := range groups {
		for _, id := range g {
			out[i] = append(out[i], fettle.Seed{Supervoxel: &id})
		}
	}
	return out
}
