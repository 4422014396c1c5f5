package cli

import (
	"fmt"
	"strings"

	"github.com/google/uuid"
	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

// rolesHelp says which roles there are.
const rolesHelp = "`ROLE` of proofreader, reviewer, lead, agent; several with commas; none may read"

func (a *app) peopleCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "people",
		Short: "List the people and machine accounts",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			people, err := listOf[fettle.Person](a.client.ListPeople(cmd.Context()))
			if err != nil {
				return err
			}
			return list(a, people,
				left("person", func(p fettle.Person) string { return p.Handle }),
				left("roles", func(p fettle.Person) string { return roles(p) }),
				left("added by", func(p fettle.Person) string { return p.AddedBy }),
				left("added at", func(p fettle.Person) string { return a.when(p.AddedAt) }),
				left("left", func(p fettle.Person) string { return yes(p.Left) }))
		},
	}
}

func roles(p fettle.Person) string {
	words := make([]string, len(p.Roles))
	for i, r := range p.Roles {
		words[i] = string(r)
	}
	return strings.Join(words, ",")
}

func (a *app) printPerson(p fettle.Person, more ...field) error {
	return record(a, p, append([]field{{"person", p.Handle}, {"roles", roles(p)}, {"added by", p.AddedBy}, {"added at", a.when(p.AddedAt)}}, more...)...)
}

func (a *app) personCommand() *cobra.Command {
	var newRoles []string
	add := &cobra.Command{
		Use:   "add HANDLE --role ROLE",
		Short: "Add a person or a machine account",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			p, err := fettle.Read[fettle.Person](a.client.AddPerson(cmd.Context(), fettle.NewPerson{Handle: args[0], Roles: asRoles(newRoles)}))
			if err != nil {
				return err
			}
			return a.printPerson(p)
		},
	}
	add.Flags().StringSliceVar(&newRoles, "role", nil, rolesHelp)
	change := &cobra.Command{
		Use:   "roles HANDLE --role ROLE",
		Short: "Replace a person's roles",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			list := asRoles(newRoles)
			return a.changePerson(cmd, args[0], fettle.PersonChange{Roles: &list})
		},
	}
	change.Flags().StringSliceVar(&newRoles, "role", nil, rolesHelp)
	leave := &cobra.Command{
		Use:   "leave HANDLE",
		Short: "Note that a person has left: their tokens end, their work stays",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			left := fettle.PersonChangeLeft(true)
			return a.changePerson(cmd, args[0], fettle.PersonChange{Left: &left})
		},
	}
	for _, c := range []*cobra.Command{add, change} {
		_ = c.RegisterFlagCompletionFunc("role", cobra.FixedCompletions([]string{"proofreader", "reviewer", "lead", "agent"}, cobra.ShellCompDirectiveNoFileComp))
	}
	return noun("person", "Add people, change their roles, note that they left", add, change, leave)
}

func asRoles(words []string) []fettle.Role {
	list := make([]fettle.Role, len(words))
	for i, w := range words {
		list[i] = fettle.Role(w)
	}
	return list
}

func (a *app) changePerson(cmd *cobra.Command, handle string, change fettle.PersonChange) error {
	if err := a.connect(); err != nil {
		return err
	}
	p, err := fettle.Read[fettle.Person](a.client.ChangePerson(cmd.Context(), handle, change))
	if err != nil {
		return err
	}
	return a.printPerson(p, field{"left", yes(p.Left)})
}

func (a *app) tokenCommand() *cobra.Command {
	return noun("token", "Issue, list and revoke the tokens that people sign in with",
		a.tokenNewCommand(), a.tokenListCommand(), a.tokenRevokeCommand())
}

func (a *app) tokenNewCommand() *cobra.Command {
	var note string
	cmd := &cobra.Command{
		Use:   "new HANDLE",
		Short: "Issue a token; its secret is shown this once",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			t, err := fettle.Read[fettle.IssuedToken](a.client.IssueToken(cmd.Context(), args[0], fettle.NewToken{Note: optional(note)}))
			if err != nil {
				return err
			}
			return record(a, t, field{"person", t.Token.Handle}, field{"token id", t.Token.Id.String()}, field{"secret", t.Secret})
		},
	}
	cmd.Flags().StringVar(&note, "note", "", "what it is for")
	return cmd
}

func (a *app) tokenListCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "list HANDLE",
		Short: "List a person's tokens, without their secrets",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := a.connect(); err != nil {
				return err
			}
			tokens, err := listOf[fettle.Token](a.client.ListTokens(cmd.Context(), args[0]))
			if err != nil {
				return err
			}
			return list(a, tokens,
				left("token id", func(t fettle.Token) string { return t.Id.String() }),
				left("note", func(t fettle.Token) string { return t.Note }),
				left("issued by", func(t fettle.Token) string { return t.IssuedBy }),
				left("issued at", func(t fettle.Token) string { return a.when(t.IssuedAt) }),
				left("last used", func(t fettle.Token) string { return a.when(has(t.LastUsed)) }),
				left("revoked", func(t fettle.Token) string { return a.when(has(t.Revoked)) }))
		},
	}
}

func (a *app) tokenRevokeCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "revoke HANDLE TOKEN-ID",
		Short: "Revoke a token",
		Args:  cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			id, err := uuid.Parse(args[1])
			if err != nil {
				return usage("%q is not a token's id", args[1]).WithNext(fmt.Sprintf("see fettle token list %s", args[0]))
			}
			if err := a.connect(); err != nil {
				return err
			}
			t, err := fettle.Read[fettle.Token](a.client.RevokeToken(cmd.Context(), args[0], id))
			if err != nil {
				return err
			}
			return record(a, t, field{"token id", t.Id.String()}, field{"revoked", a.when(has(t.Revoked))})
		},
	}
}
