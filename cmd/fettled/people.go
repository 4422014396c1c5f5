package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"fettle.example/fettle/tasks"
)

func (o *operator) personCommand() *cobra.Command {
	var roles []string
	add := &cobra.Command{
		Use:   "add HANDLE",
		Short: "Enter a person, as whoever holds this machine: the way to the first lead",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				list := make([]tasks.Role, len(roles))
				for i, r := range roles {
					list[i] = tasks.Role(r)
				}
				p, err := d.People.Add(cmd.Context(), tasks.Operator, args[0], list)
				if err != nil {
					return err
				}
				_, err = fmt.Fprintf(o.out, "added %s: %s\nnext: fettled token new %s\n", p.Handle, may(p.Roles), p.Handle)
				return err
			})
		},
	}
	add.Flags().StringSliceVar(&roles, "role", nil, "`ROLE` of proofreader, reviewer, lead, agent; several with commas; none may read")
	cmd := noun("person", "The people who work here", add)
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

// may says what somebody with some roles may do.
func may(roles []tasks.Role) string {
	if len(roles) == 0 {
		return "may read"
	}
	words := make([]string, len(roles))
	for i, r := range roles {
		words[i] = string(r)
	}
	return strings.Join(words, ", ")
}

func (o *operator) tokenCommand() *cobra.Command {
	var note string
	issue := &cobra.Command{
		Use:   "new HANDLE",
		Short: "Make a token for a person; it is printed once and kept nowhere",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				secret, _, err := d.People.IssueToken(cmd.Context(), tasks.Operator, args[0], note)
				if err != nil {
					return err
				}
				_, err = fmt.Fprintln(o.out, secret)
				return err
			})
		},
	}
	issue.Flags().StringVar(&note, "note", "made with fettled", "what it is for")
	cmd := noun("token", "The tokens that people sign in with", issue)
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}
