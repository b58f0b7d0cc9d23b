package main

import (
	"fmt"
	"runtime"
	"runtime/debug"

	"github.com/spf13/cobra"
)

func newVersion() *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "version",
		Short: "Print the version of the program and of the Go release that built it",
		Args:  usageArgs(cobra.NoArgs),
		RunE: func(cmd *cobra.Command, _ []string) error {
			v := struct {
				Version  string `json:"version"`
				Go       string `json:"go"`
				Platform string `json:"platform"`
			}{"(unknown)", runtime.Version(), runtime.GOOS + "/" + runtime.GOARCH}
			if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" {
				v.Version = info.Main.Version
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), v)
			}
			_, err := fmt.Fprintf(cmd.OutOrStdout(), "chargehand %s %s %s\n", v.Version, v.Go, v.Platform)
			return err
		},
	}
	addJSON(cmd, &asJSON)
	return cmd
}
