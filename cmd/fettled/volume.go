package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"
	"unicode"

	"github.com/spf13/cobra"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/triage"
)

func (o *operator) importCommand() *cobra.Command {
	var name string
	var noTriage bool
	cmd := &cobra.Command{
		Use:   "import DIR",
		Short: "Read a delivery into a new volume, and judge it",
		Long: `Read a delivery (volume.json and its tables as CSV, CSV.gz or Parquet) into a new volume, then let every detector
judge it and make the tasks. A delivery with errors is refused whole, with the places; nothing of it stays.`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				report, err := o.importDelivery(cmd.Context(), d, args[0], name)
				if err != nil || noTriage {
					return err
				}
				return o.triage(cmd.Context(), d, report.Info.Name)
			})
		},
	}
	cmd.Flags().StringVar(&name, "name", "", "call the volume `NAME` instead of what the delivery says")
	cmd.Flags().BoolVar(&noTriage, "no-triage", false, "import only")
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

func (o *operator) importDelivery(ctx context.Context, d *Daemon, dir, name string) (*base.Report, error) {
	p := newProgress(o.err)
	report, err := base.Import(ctx, d.Pool, dir, base.ImportOptions{Name: name, Progress: func(s base.Progress) {
		if s.Unit != "" { // the last word, "done", measures nothing
			p.step(s.Stage, s.Done, s.Total, s.Unit)
		}
	}})
	p.end()
	var refusal *base.Refusal
	if errors.As(err, &refusal) {
		printRefusal(o.err, refusal)
		return nil, err
	}
	if err != nil {
		return nil, err
	}
	printReport(o.out, report)
	return report, nil
}

func printRefusal(w io.Writer, r *base.Refusal) {
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "table\tline\tcolumn\tvalue\treason")
	for _, p := range r.Problems {
		line := ""
		if p.Line > 0 {
			line = fmt.Sprint(p.Line)
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\n", p.Table, line, p.Column, shown(p.Value), p.Reason)
	}
	t.Flush()
	if r.More > 0 {
		fmt.Fprintf(w, "and %d more\n", r.More)
	}
}

// shown is a value as it stands in a table, quoted when it holds what a terminal would act on.
func shown(value string) string {
	if strings.ContainsFunc(value, unicode.IsControl) {
		return strconv.Quote(value)
	}
	return value
}

func printReport(w io.Writer, r *base.Report) {
	i := r.Info
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	for _, line := range []struct {
		count int64
		what  string
	}{
		{i.Supervoxels, "supervoxels"}, {i.Segments, "base segments"}, {i.Contacts, "contacts"},
		{i.Rejected, "of them between base segments"}, {i.Assumed, "links assumed to hold base segments together"},
		{i.Synapses, "synapses"}, {i.Nuclei, "nuclei"}, {i.Truth, "supervoxels with a true neuron"},
	} {
		fmt.Fprintf(t, "%d\t %s\n", line.count, line.what)
	}
	fmt.Fprintf(w, "volume %s\n", i.Name)
	t.Flush()
	fmt.Fprintf(w, "digest %s\n", i.Digest)
	for _, warning := range r.Warnings {
		fmt.Fprintf(w, "warning: %s\n", warning)
	}
	fmt.Fprintf(w, "imported in %.1f s\n", r.Elapsed.Seconds())
}

func (o *operator) triageCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "triage VOLUME",
		Short: "Let every detector judge a whole volume, and make the tasks",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error { return o.triage(cmd.Context(), d, args[0]) })
		},
	}
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

func (o *operator) triage(ctx context.Context, d *Daemon, volume string) error {
	v, err := d.Ledger.Volume(ctx, volume)
	if err != nil {
		return err
	}
	p := newProgress(o.err)
	err = triage.Full(ctx, v, func(done, total int64) { p.step("triage", done, total, "supervoxels") })
	p.end()
	if err != nil {
		return err
	}
	made, err := d.Queue.Fill(ctx, v)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(o.out, "%d new tasks\n", made)
	return err
}

func (o *operator) reconcileCommand() *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "reconcile VOLUME",
		Short: "Recompute every segment from base and entries alone, and compare with the tables",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error { return o.reconcile(cmd.Context(), d, args[0], asJSON) })
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "print the report as JSON")
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

func (o *operator) reconcile(ctx context.Context, d *Daemon, volume string, asJSON bool) error {
	v, err := d.Ledger.Volume(ctx, volume)
	if err != nil {
		return err
	}
	p := newProgress(o.err)
	r, err := v.Reconcile(ctx, func(done, total int64) { p.step("reconcile", done, total, "steps") })
	p.end()
	if err != nil {
		return err
	}
	if asJSON {
		err = json.NewEncoder(o.out).Encode(r)
	} else {
		printReconciliation(o.out, volume, r)
	}
	if err == nil && !r.Clean() {
		err = fault.Newf(fault.Internal, "reconcile-differs", "the tables of %s differ from its base and entries", volume).
			WithNext("stop posting to this volume, keep the report, and restore the tables from base and entries")
	}
	return err
}

func printReconciliation(w io.Writer, volume string, r *ledger.Reconciliation) {
	fmt.Fprintf(w, "%s at position %d: %d entries, %d supervoxels, %d current segments recomputed\n",
		volume, r.Position, r.Entries, r.Supervoxels, r.Segments)
	if r.Clean() {
		fmt.Fprintln(w, "clean: no difference")
		return
	}
	for _, line := range r.Differences {
		fmt.Fprintf(w, "differs: %s\n", line)
	}
	if r.More > 0 {
		fmt.Fprintf(w, "and %d more\n", r.More)
	}
}
