package main

import (
	"fmt"
	"runtime/debug"

	"github.com/spf13/cobra"

	"catenrich/pipeline/job"
)

func (a *app) versionCommand() *cobra.Command {
	return &cobra.Command{
		Use:     "version",
		Short:   "Print version, revision, Go version and module versions",
		Example: "  catenrich version",
		Args:    cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			info, ok := debug.ReadBuildInfo()
			if !ok {
				info = &debug.BuildInfo{GoVersion: "unknown"}
			}
			fmt.Fprintf(a.stdout, "catenrich %s\noutput version %d\n", orUnknown(info.Main.Version), job.OutputVersion)
			for _, s := range info.Settings {
				if s.Key == "vcs.revision" || s.Key == "vcs.modified" || s.Key == "GOARCH" || s.Key == "GOAMD64" {
					fmt.Fprintf(a.stdout, "%s %s\n", s.Key, s.Value)
				}
			}
			fmt.Fprintf(a.stdout, "go %s\n", info.GoVersion)
			for _, m := range info.Deps {
				fmt.Fprintf(a.stdout, "module %s %s\n", m.Path, m.Version)
			}
			return nil
		},
	}
}

func orUnknown(s string) string {
	if s == "" {
		return "(unknown version)"
	}
	return s
}
