package cli

import (
	"net/http"
	"strings"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) detectorsCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "detectors",
		Short: "List the rules that look for errors",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			detectors, err := listOf[fettle.Detector](a.client.ListDetectors(cmd.Context()))
			if err != nil {
				return err
			}
			return list(a, detectors,
				left("detector", func(d fettle.Detector) string { return d.Name }),
				left("family", func(d fettle.Detector) string { return d.Family }),
				left("suspects", func(d fettle.Detector) string { return string(d.Kind) }),
				left("says", func(d fettle.Detector) string { return d.Says }))
		},
	}
}

func (a *app) findingsCommand() *cobra.Command {
	var c choice
	var detector, segment string
	var limit int
	cmd := &cobra.Command{
		Use:   "findings",
		Short: "List what looks suspicious now, most gain first",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			p := fettle.ListFindingsParams{Detector: optional(detector), Family: optional(c.family),
				Kind: optional(fettle.TaskKind(c.kind)), Segment: optional(segment)}
			findings, err := every[fettle.Finding](limit, func(cursor *string, n *int) (*http.Response, error) {
				p.Cursor, p.Limit = cursor, n
				return a.client.ListFindings(cmd.Context(), name, &p)
			})
			if err != nil {
				return err
			}
			return list(a, findings,
				left("detector", func(f fettle.Finding) string { return f.Detector }),
				left("kind", func(f fettle.Finding) string { return string(f.Kind) }),
				right("probability", func(f fettle.Finding) string { return fixed(f.Probability, 2) }),
				right("gain", func(f fettle.Finding) string { return fixed(f.Gain, 1) }),
				left("segments", func(f fettle.Finding) string { return strings.Join(f.Segments, " ") }),
				left("point nm", func(f fettle.Finding) string { return point(f.PointNm) }),
				left("said", func(f fettle.Finding) string { return f.Said }))
		},
	}
	c.flags(cmd)
	f := cmd.Flags()
	f.StringVar(&detector, "detector", "", "by this `DETECTOR`")
	f.StringVar(&segment, "segment", "", "about this `SEGMENT`")
	f.IntVar(&limit, "limit", 50, "at most so many (0: all)")
	return cmd
}
