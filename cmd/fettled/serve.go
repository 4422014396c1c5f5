package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"fettle.example/fettle/migrations"
)

func (o *operator) serveCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "serve",
		Short: "Serve the API, and work in the background unless --no-worker",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				return d.Run(cmd.Context(), true, !o.config.NoWorker, func(address string) {
					fmt.Fprintf(o.out, "listening on http://%s\n", address)
					o.hint(cmd.Context(), d)
				})
			})
		},
	}
	o.use(cmd, "database", "fetch-postgres", "listen", "no-worker")
	return cmd
}

// hint says what an empty house still needs.
func (o *operator) hint(ctx context.Context, d *Daemon) {
	if people, err := d.People.List(ctx); err == nil && len(people) == 0 {
		fmt.Fprintln(o.err, "next: nobody can sign in yet: fettled person add HANDLE --role lead, then fettled token new HANDLE")
	}
	if volumes, err := d.Ledger.Volumes(ctx); err == nil && len(volumes) == 0 {
		fmt.Fprintln(o.err, "next: there is no volume yet: fettled import DIR")
	}
}

func (o *operator) workCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "work",
		Short: "Work in the background only: triage what changed, keep the queue, expire claims",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				return d.Run(cmd.Context(), false, true, func(string) { fmt.Fprintln(o.out, "working") })
			})
		},
	}
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

func (o *operator) migrateCommand() *cobra.Command {
	var role string
	cmd := &cobra.Command{
		Use:   "migrate",
		Short: "Bring the database up to date (every other command does so too)",
		Long: `Bring the database up to date (every other command does so too).

With --app-role, also let a role of PostgreSQL do the application's work that owns no table. Serve with that role's address: it can
append to the ledger, and PostgreSQL refuses it any change of what was said before. Migrate with the owner's address, and name the
role again after each migration:

  create role fettle_app login password '…';       -- in psql, once
  fettled migrate --database postgres://owner@…/fettle --app-role fettle_app
  fettled serve --database postgres://fettle_app:…@…/fettle`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return o.with(cmd.Context(), func(d *Daemon) error {
				if role != "" {
					if err := migrations.Grant(cmd.Context(), d.Pool, role); err != nil {
						return err
					}
				}
				_, err := fmt.Fprintln(o.out, "the database is up to date")
				return err
			})
		},
	}
	cmd.Flags().StringVar(&role, "app-role", "", "grant the `ROLE` of PostgreSQL what the application needs")
	o.use(cmd, "database", "fetch-postgres")
	return cmd
}

func (o *operator) postgresCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "postgres",
		Short: "Run the private PostgreSQL alone, for psql and backups, until interrupted",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			o.config.Database = ""
			return o.with(cmd.Context(), func(d *Daemon) error {
				fmt.Fprintf(o.out, "psql '%s'\n", d.address)
				<-cmd.Context().Done()
				return nil
			})
		},
	}
	o.use(cmd, "fetch-postgres")
	return cmd
}
