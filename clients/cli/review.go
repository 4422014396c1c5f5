package cli

import (
	"fmt"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) reviewsCommand() *cobra.Command {
	var limit int
	cmd := &cobra.Command{
		Use:   "reviews",
		Short: "List resolutions that wait for a review by you, oldest first",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			tasks, err := listOf[fettle.Task](a.client.ListReviews(cmd.Context(), name, &fettle.ListReviewsParams{Limit: optional(limit)}))
			if err != nil {
				return err
			}
			return list(a, tasks,
				right("task", func(t fettle.Task) string { return fmt.Sprint(t.Number) }),
				left("kind", func(t fettle.Task) string { return string(t.Kind) }),
				left("family", func(t fettle.Task) string { return t.Family }),
				left("outcome", func(t fettle.Task) string { return string(has(t.Resolution).Outcome) }),
				left("person", func(t fettle.Task) string { return has(t.Resolution).Person }),
				left("at", func(t fettle.Task) string { return a.when(has(t.Resolution).At) }),
				right("entry", func(t fettle.Task) string { return positive(has(has(t.Resolution).Position)) }),
				left("note", func(t fettle.Task) string { return has(t.Resolution).Note }))
		},
	}
	cmd.Flags().IntVar(&limit, "limit", 100, "at most so many")
	return cmd
}

func (a *app) reviewCommand() *cobra.Command {
	var note string
	cmd := &cobra.Command{
		Use:   "review NUMBER accept|return",
		Short: "Accept somebody else's resolution, or return it; a returned correction is undone",
		Args:  cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			n, err := parseNumber(args[0], "a task's number")
			if err != nil {
				return err
			}
			verdict := fettle.Verdict(args[1])
			if reviewed[verdict] == "" {
				return usage("there is no verdict %q", args[1]).WithNext("use accept or return")
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			done, err := fettle.Read[fettle.TaskDone](a.client.ReviewTask(cmd.Context(), name, n, fettle.ReviewRequest{Verdict: verdict, Note: optional(note)}))
			if err != nil {
				return err
			}
			return a.printDone(done)
		},
		ValidArgsFunction: func(_ *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
			if len(args) == 1 {
				return []string{"accept", "return"}, cobra.ShellCompDirectiveNoFileComp
			}
			return nil, cobra.ShellCompDirectiveNoFileComp
		},
	}
	cmd.Flags().StringVar(&note, "note", "", "a word for the proofreader")
	return cmd
}
