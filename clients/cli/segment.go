package cli

import (
	"fmt"
	"net/http"
	"strings"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) segmentCommand() *cobra.Command {
	return noun("segment", "Ask about segments, now and as of earlier",
		a.segmentOfCommand(), a.segmentShowCommand(), a.segmentHistoryCommand(), a.segmentMembersCommand(), a.segmentNearCommand())
}

func (a *app) segmentOfCommand() *cobra.Command {
	var at, file string
	cmd := &cobra.Command{
		Use:   "of SUPERVOXEL…",
		Short: "Tell which segments supervoxels are in",
		Example: `  fettle segment of 9007199254740993 13
  fettle segment of --file ids.csv --at 2026-12-01 -o csv`,
		RunE: func(cmd *cobra.Command, args []string) error {
			ids, err := parseIDs(args)
			if err != nil {
				return err
			}
			if file != "" {
				more, err := a.readIDs(file)
				if err != nil {
					return err
				}
				ids = append(ids, more...)
			}
			if len(ids) == 0 {
				return usage("no supervoxel is named").WithNext("give ids, or --file with one id first in every line")
			}
			items, err := a.lookUp(cmd, ids, at)
			if err != nil {
				return err
			}
			return list(a, items,
				right("supervoxel", func(i fettle.LookupItem) string { return i.Supervoxel }),
				right("segment", func(i fettle.LookupItem) string { return i.Segment }))
		},
	}
	addAt(cmd, &at)
	cmd.Flags().StringVar(&file, "file", "", "read ids from a table `FILE`, one first in every line; - is standard input")
	return cmd
}

// largestLookup is how many supervoxels the server looks up at once.
const largestLookup = 100_000

// lookUp asks for the segments of any number of supervoxels. All of them are asked as of one position, so that an
// entry posted between two parts does not show in one of them only.
func (a *app) lookUp(cmd *cobra.Command, ids []string, at string) ([]fettle.LookupItem, error) {
	ctx := cmd.Context()
	name, err := a.volumeName(ctx)
	if err != nil {
		return nil, err
	}
	moment, err := checkedAt(at)
	if err != nil {
		return nil, err
	}
	if moment == nil && len(ids) > largestLookup {
		v, err := fettle.Read[fettle.Volume](a.client.GetVolume(ctx, name))
		if err != nil {
			return nil, err
		}
		position := fmt.Sprint(v.Position)
		moment = &position
	}
	var items []fettle.LookupItem
	for len(ids) > 0 {
		n := min(len(ids), largestLookup)
		part, err := listOf[fettle.LookupItem](a.client.LookUp(ctx, name, fettle.LookupRequest{Supervoxels: ids[:n], At: moment}))
		if err != nil {
			return nil, err
		}
		items, ids = append(items, part...), ids[n:]
	}
	return items, nil
}

func (a *app) segmentShowCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "show SEGMENT",
		Short: "Show what a segment holds or held, and what became of it",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			name, id, err := a.volumeAndID(cmd, args[0])
			if err != nil {
				return err
			}
			s, err := fettle.Read[fettle.Segment](a.client.GetSegment(cmd.Context(), name, id))
			if err != nil {
				return err
			}
			t := s.Totals
			fields := []field{{"segment", s.Id}, {"born at position", fmt.Sprint(s.Born)}}
			if s.Current {
				fields = append(fields, field{"current", "yes"})
			} else {
				fields = append(fields, field{"retired at position", fmt.Sprint(has(s.Retired))}, field{"became", strings.Join(s.Became, " ")})
			}
			return record(a, s, append(fields,
				field{"supervoxels", fmt.Sprint(t.Supervoxels)}, field{"voxels", fmt.Sprint(t.Voxels)},
				field{"synapses in", fmt.Sprint(t.SynapsesIn)}, field{"synapses out", fmt.Sprint(t.SynapsesOut)},
				field{"nuclei", fmt.Sprint(t.Nuclei)}, field{"from nm", point(t.MinNm)}, field{"to nm", point(t.MaxNm)})...)
		},
	}
}

func (a *app) segmentHistoryCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "history SEGMENT",
		Short: "List the entries that a segment's content came through, oldest first",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			name, id, err := a.volumeAndID(cmd, args[0])
			if err != nil {
				return err
			}
			entries, err := every[fettle.Entry](0, func(cursor *string, n *int) (*http.Response, error) {
				return a.client.GetSegmentHistory(cmd.Context(), name, id, &fettle.GetSegmentHistoryParams{Cursor: cursor, Limit: n})
			})
			if err != nil {
				return err
			}
			return a.printEntries(entries)
		},
	}
}

func (a *app) segmentMembersCommand() *cobra.Command {
	var limit int
	cmd := &cobra.Command{
		Use:   "members SEGMENT",
		Short: "List the supervoxels of a current segment",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			name, id, err := a.volumeAndID(cmd, args[0])
			if err != nil {
				return err
			}
			ids, err := every[string](limit, func(cursor *string, n *int) (*http.Response, error) {
				return a.client.ListMembers(cmd.Context(), name, id, &fettle.ListMembersParams{Cursor: cursor, Limit: n})
			})
			if err != nil {
				return err
			}
			return list(a, ids, right("supervoxel", func(id string) string { return id }))
		},
	}
	cmd.Flags().IntVar(&limit, "limit", 0, "at most so many (0: all)")
	return cmd
}

func (a *app) segmentNearCommand() *cobra.Command {
	var segment string
	cmd := &cobra.Command{
		Use:   "near X,Y,Z",
		Short: "Find the supervoxel nearest to a point in nm, and its segment",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			p, err := parsePoint(args[0])
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			n, err := fettle.Read[fettle.Nearest](a.client.GetNearest(cmd.Context(), name,
				&fettle.GetNearestParams{X: p[0], Y: p[1], Z: p[2], Segment: optional(segment)}))
			if err != nil {
				return err
			}
			return record(a, n, field{"supervoxel", n.Supervoxel}, field{"segment", n.Segment},
				field{"distance", fixed(n.DistanceNm, 0) + " nm"})
		},
	}
	cmd.Flags().StringVar(&segment, "segment", "", "look in this `SEGMENT` alone, which is faster")
	return cmd
}

// volumeAndID is the volume that is meant, and a word held to be an id.
func (a *app) volumeAndID(cmd *cobra.Command, word string) (name, id string, err error) {
	if id, err = parseID(word); err != nil {
		return "", "", err
	}
	name, err = a.volumeName(cmd.Context())
	return name, id, err
}

// checkedAt is the query parameter of a moment.
func checkedAt(word string) (*string, error) {
	position, moment, err := parseAt(word)
	switch {
	case err != nil:
		return nil, err
	case position != nil:
		s := fmt.Sprint(*position)
		return &s, nil
	case moment != nil:
		s := moment.Format("2006-01-02T15:04:05.999999999Z07:00")
		return &s, nil
	}
	return nil, nil
}
