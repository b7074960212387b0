package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"leadline/cmd/leadline/job"
)

func initCommand(stderr io.Writer) *cobra.Command {
	return &cobra.Command{
		Use:   "init [NAME]",
		Short: "Write a commented starter job, NAME.toml",
		Args:  arguments(0, 1),
		RunE: func(c *cobra.Command, args []string) error {
			name := "job"
			if len(args) == 1 {
				name = strings.TrimSuffix(args[0], ".toml")
			}
			file, err := os.OpenFile(name+".toml", os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
			if errors.Is(err, os.ErrExist) {
				return fmt.Errorf("%s.toml exists already; choose another name", name)
			}
			if err != nil {
				return err
			}
			_, err = file.Write(job.Starter(name))
			if err := errorsFirst(err, file.Close()); err != nil {
				return err
			}
			_, err = fmt.Fprintf(c.OutOrStdout(), "wrote %s.toml; now: leadline run %s.toml\n", name, name)
			return err
		},
	}
}
