package cli

import (
	"context"
	"fmt"

	"fettle.example/fettle/clients/fettle"
)

// foresee shows what a correction would do: on standard output when that is all that was asked for, else beside the
// question, so that what is printed at the end is the entry alone.
func (a *app) foresee(c *correction, value any, fields []field) error {
	if c.preview {
		return record(a, value, fields...)
	}
	return a.lines(a.Err, fields)
}

func (a *app) previewMerge(ctx context.Context, volume string, req fettle.MergeRequest, c *correction) (fettle.MergePreview, error) {
	p, err := fettle.Read[fettle.MergePreview](a.client.PreviewMerge(ctx, volume, req))
	if err != nil {
		return p, err
	}
	var fields []field
	for _, s := range p.Segments {
		fields = append(fields, field{"segment", s.Id + ": " + holds(s.Totals)})
	}
	affinity := "none: they do not touch"
	if p.Affinity != nil {
		affinity = fixed(*p.Affinity, 2)
	}
	fields = append(fields, field{"would make", holds(p.Totals)},
		field{"link", fmt.Sprintf("%s to %s, %s nm apart", p.A, p.B, fixed(p.DistanceNm, 0))}, field{"affinity", affinity})
	return p, a.foresee(c, p, fields)
}

func (a *app) previewSplit(ctx context.Context, volume string, req fettle.SplitRequest, c *correction) (fettle.SplitPreview, error) {
	p, err := fettle.Read[fettle.SplitPreview](a.client.PreviewSplit(ctx, volume, req))
	if err != nil {
		return p, err
	}
	fields := []field{{"segment", p.Segment.Id + ": " + holds(p.Segment.Totals)}}
	for _, s := range p.Sides {
		name := fmt.Sprintf("side %d", s.Group)
		if s.Group == 0 {
			name = "falls off"
		}
		fields = append(fields, field{name, fmt.Sprintf("%s, %s µm of cable, from supervoxel %s", holds(s.Totals), fixed(s.CableNm/1000, 1), s.First)})
	}
	fields = append(fields, field{"cut", fmt.Sprintf("%s and %s, at a cost of %s (log-odds)",
		count(len(p.Cut.Contacts), "contact"), count(len(p.Cut.Links), "link"), fixed(p.Cost, 2))})
	for _, w := range p.Warnings {
		fields = append(fields, field{"warning", w})
	}
	return p, a.foresee(c, p, fields)
}

// holds sums a segment up in a line.
func holds(t fettle.Totals) string {
	return fmt.Sprintf("%s, %s voxels, synapses %d in and %d out, %s",
		count(int(t.Supervoxels), "supervoxel"), thousands(t.Voxels), t.SynapsesIn, t.SynapsesOut, counted(int(t.Nuclei), "nucleus", "nuclei"))
}

// count says how many, in the right number.
func count(n int, one string) string { return counted(n, one, one+"s") }

func counted(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, many)
}

// thousands parts a large number for the eye.
func thousands(n int64) string {
	s := fmt.Sprint(n)
	for i := len(s) - 3; i > 0 && s[i-1] != '-'; i -= 3 {
		s = s[:i] + " " + s[i:]
	}
	return s
}
