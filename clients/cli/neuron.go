package cli

import (
	"github.com/spf13/cobra"
	"net/http"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) neuronCommand() *cobra.Command {
	return noun("neuron", "Follow cells by name, whatever becomes of their segments",
		a.neuronAddCommand(), a.neuronListCommand(), a.neuronShowCommand(), a.neuronHistoryCommand())
}

func (a *app) neuronAddCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "add NAME ANCHOR",
		Short: "Name a cell, pinned to a supervoxel (an id, or @x,y,z in nm), best in its soma",
		Args:  cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			anchor, err := parseSeed(args[1])
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			n, err := fettle.Read[fettle.Neuron](a.client.AddNeuron(cmd.Context(), name, fettle.NewNeuron{Name: args[0], Anchor: anchor.api()}))
			if err != nil {
				return err
			}
			return a.printNeuron(n)
		},
	}
}

func (a *app) neuronListCommand() *cobra.Command {
	var at string
	cmd := &cobra.Command{
		Use:   "list",
		Short: "List the neurons and their segments",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			moment, err := checkedAt(at)
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			neurons, err := every[fettle.Neuron](0, func(cursor *string, n *int) (*http.Response, error) {
				return a.client.ListNeurons(cmd.Context(), name, &fettle.ListNeuronsParams{At: moment, Cursor: cursor, Limit: n})
			})
			if err != nil {
				return err
			}
			return list(a, neurons,
				left("neuron", func(n fettle.Neuron) string { return n.Name }),
				right("anchor", func(n fettle.Neuron) string { return n.Anchor }),
				right("segment", func(n fettle.Neuron) string { return n.Segment }),
				left("added by", func(n fettle.Neuron) string { return n.AddedBy }),
				left("added at", func(n fettle.Neuron) string { return a.when(n.AddedAt) }))
		},
	}
	addAt(cmd, &at)
	return cmd
}

func (a *app) neuronShowCommand() *cobra.Command {
	var at string
	cmd := &cobra.Command{
		Use:   "show NAME",
		Short: "Show a neuron and the segment that holds it, now or as of earlier",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			moment, err := checkedAt(at)
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			n, err := fettle.Read[fettle.Neuron](a.client.GetNeuron(cmd.Context(), name, args[0], &fettle.GetNeuronParams{At: moment}))
			if err != nil {
				return err
			}
			return a.printNeuron(n)
		},
	}
	addAt(cmd, &at)
	return cmd
}

func (a *app) neuronHistoryCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "history NAME",
		Short: "List the entries that changed a neuron, oldest first",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			entries, err := every[fettle.Entry](0, func(cursor *string, n *int) (*http.Response, error) {
				return a.client.GetNeuronHistory(cmd.Context(), name, args[0], &fettle.GetNeuronHistoryParams{Cursor: cursor, Limit: n})
			})
			if err != nil {
				return err
			}
			return a.printEntries(entries)
		},
	}
}

func (a *app) printNeuron(n fettle.Neuron) error {
	return record(a, n, field{"neuron", n.Name}, field{"anchor", n.Anchor}, field{"segment", n.Segment},
		field{"added by", n.AddedBy}, field{"added at", a.when(n.AddedAt)})
}
