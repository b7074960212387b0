package main

import (
	"io"

	"github.com/spf13/cobra"
)

func measureCommand(stderr io.Writer) *cobra.Command {
	c := &cobra.Command{
		Use:   "measure",
		Short: "Records of randomized measurements: simulate, check, collapse",
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return unknownCommand(cmd, args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	c.AddCommand(simulateCommand(stderr), checkCommand(stderr), collapseCommand(stderr))
	return c
}
