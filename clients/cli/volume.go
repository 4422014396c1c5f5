package cli

import (
	"context"
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) volumesCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "volumes",
		Short: "List the volumes",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			volumes, err := a.volumes(cmd.Context())
			if err != nil {
				return err
			}
			return list(a, volumes,
				left("volume", func(v fettle.VolumeBrief) string { return v.Name }),
				right("position", func(v fettle.VolumeBrief) string { return fmt.Sprint(v.Position) }))
		},
	}
}

func (a *app) volumes(ctx context.Context) ([]fettle.VolumeBrief, error) {
	if err := a.connect(); err != nil {
		return nil, err
	}
	return listOf[fettle.VolumeBrief](a.client.ListVolumes(ctx))
}

func (a *app) volumeCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "volume [NAME]",
		Short: "Show what a volume holds and how far its ledger and its followers are",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 1 {
				a.volume = args[0]
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			v, err := fettle.Read[fettle.Volume](a.client.GetVolume(cmd.Context(), name))
			if err != nil {
				return err
			}
			return record(a, v, field{"volume", v.Name},
				field{"position", fmt.Sprint(v.Position)},
				field{"triage has followed to", fmt.Sprint(v.TriagePosition)},
				field{"tasks have followed to", fmt.Sprint(v.TasksPosition)},
				field{"supervoxels", fmt.Sprint(v.Supervoxels)},
				field{"base segments", fmt.Sprint(v.BaseSegments)},
				field{"contacts", fmt.Sprint(v.Contacts)},
				field{"rejected contacts", fmt.Sprint(v.RejectedContacts)},
				field{"assumed links", fmt.Sprint(v.AssumedLinks)},
				field{"synapses", fmt.Sprint(v.Synapses)},
				field{"nuclei", fmt.Sprint(v.Nuclei)},
				field{"voxel nm", point(v.VoxelNm)},
				field{"from nm", point(v.MinNm)},
				field{"to nm", point(v.MaxNm)},
				field{"has truth", yes(v.HasTruth)},
				field{"digest", v.Digest})
		},
	}
}

func (a *app) qualityCommand() *cobra.Command {
	var at string
	cmd := &cobra.Command{
		Use:   "quality",
		Short: "Score the segments against the delivered truth",
		Long: `Score the segments against the delivered truth, where a delivery had one: variation of information (what is glued
and what is cut up, in bits; 0 is perfect) and adapted Rand error.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			q, err := fettle.Read[fettle.Quality](a.client.GetQuality(cmd.Context(), name, &fettle.GetQualityParams{At: optional(at)}))
			if err != nil {
				return err
			}
			return record(a, q, field{"position", fmt.Sprint(q.Position)},
				field{"split bits", fixed(q.SplitBits, 4)}, field{"merge bits", fixed(q.MergeBits, 4)},
				field{"rand error", fixed(q.RandError, 4)},
				field{"rand precision", fixed(q.RandPrecision, 4)}, field{"rand recall", fixed(q.RandRecall, 4)},
				field{"false splits", fmt.Sprint(q.FalseSplits)}, field{"false merges", fmt.Sprint(q.FalseMerges)},
				field{"counted from supervoxels", fmt.Sprint(q.CountedLeast)},
				field{"scored voxels", fmt.Sprint(q.ScoredVoxels)}, field{"not scored voxels", fmt.Sprint(q.NotScoredVoxels)})
		},
	}
	addAt(cmd, &at)
	return cmd
}

// addAt gives a command the moment that its question is about.
func addAt(cmd *cobra.Command, at *string) {
	cmd.Flags().StringVar(at, "at", "", "as of a `MOMENT`: a position, or a time such as 2026-12-01T09:30:00Z")
}

// completeVolumes offers the volumes' names to the shell.
func (a *app) completeVolumes(cmd *cobra.Command, _ []string, _ string) ([]string, cobra.ShellCompDirective) {
	volumes, err := a.volumes(cmd.Context())
	if err != nil {
		return nil, cobra.ShellCompDirectiveNoFileComp
	}
	names := make([]string, len(volumes))
	for i, v := range volumes {
		names[i] = v.Name
	}
	return names, cobra.ShellCompDirectiveNoFileComp
}

// point writes a place in whole nm.
func point(p fettle.Point) string {
	parts := make([]string, len(p))
	for i, v := range p {
		parts[i] = fixed(v, 0)
	}
	return strings.Join(parts, ",")
}

func yes(b bool) string {
	if b {
		return "yes"
	}
	return "no"
}
