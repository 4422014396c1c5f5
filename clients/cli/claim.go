package cli

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
)

func (a *app) claimCommand() *cobra.Command {
	var c choice
	cmd := &cobra.Command{
		Use:   "claim [NUMBER]",
		Short: "Take the next best task, or the one of a number",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			var req fettle.ClaimRequest
			if len(args) == 1 {
				n, err := parseNumber(args[0], "a task's number")
				if err != nil {
					return err
				}
				req.Task = &n
			}
			if c.kind != "" {
				req.Kinds = &[]fettle.TaskKind{fettle.TaskKind(c.kind)}
			}
			if c.family != "" {
				req.Families = &[]string{c.family}
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			t, err := fettle.Read[fettle.Task](a.client.ClaimTask(cmd.Context(), name, &fettle.ClaimTaskParams{IdempotencyKey: newKey().String()}, req))
			if err != nil {
				return err
			}
			return a.printTask(t)
		},
	}
	c.flags(cmd)
	return cmd
}

// heldTask is the task in this person's hands: the one of a number, or the only one.
func (a *app) heldTask(ctx context.Context, args []string) (fettle.Task, error) {
	name, err := a.volumeName(ctx)
	if err != nil {
		return fettle.Task{}, err
	}
	held, err := listOf[fettle.Task](a.client.ListClaims(ctx, name))
	if err != nil {
		return fettle.Task{}, err
	}
	if len(args) == 1 {
		n, err := parseNumber(args[0], "a task's number")
		if err != nil {
			return fettle.Task{}, err
		}
		for _, t := range held {
			if t.Number == n {
				return t, nil
			}
		}
		return fettle.Task{}, fault.Newf(fault.NotFound, "task-not-held", "you do not hold task %d", n).
			WithNext("see fettle task show " + args[0] + " for who does; fettle claim takes one")
	}
	switch len(held) {
	case 0:
		return fettle.Task{}, fault.New(fault.NotFound, "task-not-held", "you hold no task").WithNext("take one: fettle claim")
	case 1:
		return held[0], nil
	}
	return fettle.Task{}, usage("you hold %d tasks", len(held)).WithNext("say which, by its number")
}

func (a *app) releaseCommand() *cobra.Command {
	var reason string
	cmd := &cobra.Command{
		Use:   "release [NUMBER] --reason WHY",
		Short: "Give a task back",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if reason == "" {
				return usage("a task goes back with a reason").WithNext("add --reason, for whoever takes it next")
			}
			t, err := a.heldTask(cmd.Context(), args)
			if err != nil {
				return err
			}
			t, err = fettle.Read[fettle.Task](a.client.ReleaseClaim(cmd.Context(), a.volume, t.Claim.Id, fettle.ReleaseRequest{Reason: reason}))
			if err != nil {
				return err
			}
			return record(a, t, field{"task", fmt.Sprint(t.Number)}, field{"state", string(t.State)})
		},
	}
	cmd.Flags().StringVar(&reason, "reason", "", "why")
	return cmd
}

func (a *app) extendCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "extend [NUMBER]",
		Short: "Begin the lease of a task that you hold again",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			t, err := a.heldTask(cmd.Context(), args)
			if err != nil {
				return err
			}
			c, err := fettle.Read[fettle.Claim](a.client.ExtendClaim(cmd.Context(), a.volume, t.Claim.Id, repeatable(t.Claim.Id)))
			if err != nil {
				return err
			}
			return record(a, c, field{"task", fmt.Sprint(c.Task)}, field{"yours until", a.when(c.Until)})
		},
	}
}
