package main

import (
	"github.com/spf13/cobra"

	"catenrich/internal/fault"
)

func (a *app) demoCommand() *cobra.Command {
	return &cobra.Command{Use: "demo DIR", RunE: func(*cobra.Command, []string) error { return fault.Internal.Errorf("not yet") }}
}
