package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"catenrich/cosmo"
	"catenrich/pipeline"
)

func (a *app) planCommand() *cobra.Command {
	var asJSON bool
	var shares int
	var settings jobFlags
	c := &cobra.Command{
		Use:   "plan [JOB.toml | FILES…]",
		Short: "Show what run would do, and write nothing",
		Example: `  catenrich plan nightly.toml
  catenrich plan nightly.toml --shares 8
  catenrich plan nightly.toml --json | jq -r .config_hash`,
		RunE: func(_ *cobra.Command, args []string) error {
			if err := checkShares(shares); err != nil {
				return err
			}
			resolved, _, err := settings.resolve(args)
			if err != nil {
				return err
			}
			plan, err := pipeline.NewPlan(resolved, formats())
			if err != nil {
				return err
			}
			if err := plan.Inspect(); err != nil {
				return err
			}
			if asJSON {
				view := planJSON(plan)
				view.Shares = shareViews(plan, shares)
				return printJSON(a.stdout, view)
			}
			return errors.Join(planText(a.stdout, plan), sharesText(a.stdout, plan, shares))
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print JSON")
	c.Flags().IntVar(&shares, "shares", 0, "also show how the units would be dealt to so many shares (run --share I/N)")
	settings.register(c.Flags())
	return c
}

// planView is the plan as JSON.
type planView struct {
	Title      string          `json:"title"`
	ConfigHash string          `json:"config_hash"`
	Units      []unitView      `json:"units"`
	Added      []addedView     `json:"columns"`
	Models     []modelView     `json:"models"`
	Terms      []string        `json:"terms"`
	Warnings   []string        `json:"warnings"`
	Settings   json.RawMessage `json:"settings"`
	Shares     []shareView     `json:"shares,omitempty"`
}

type unitView struct {
	ID     string `json:"id"`
	Input  string `json:"input"`
	Output string `json:"output"`
	Bytes  int64  `json:"bytes"`
}

type addedView struct {
	Name        string `json:"name"`
	Unit        string `json:"unit"`
	UCD         string `json:"ucd"`
	Description string `json:"description"`
	Source      string `json:"source"`
}

// modelView is one cosmology in numbers; null where a quantity is infinite or
// does not exist.
type modelView struct {
	Suffix          string   `json:"suffix"`
	AgeGyr          *float64 `json:"age_gyr"`
	HubbleDistance  *float64 `json:"hubble_distance_mpc"`
	ParticleHorizon *float64 `json:"particle_horizon_mpc"`
	EventHorizon    *float64 `json:"event_horizon_mpc"`
	ZHubbleSphere   *float64 `json:"z_hubble_sphere"`
	ZEventHorizon   *float64 `json:"z_event_horizon"`
}

func planJSON(p *pipeline.Plan) planView {
	v := planView{Title: p.Job.Title, ConfigHash: p.ConfigHash, Terms: p.Kernel.Sources(), Warnings: append([]string{}, p.Warnings...), Settings: p.Settings}
	for _, u := range p.Units {
		v.Units = append(v.Units, unitView{u.ID, u.Input, u.Output, u.Size})
	}
	for _, f := range p.Kernel.Added() {
		v.Added = append(v.Added, addedView{f.Name, f.Unit, f.UCD, f.Description, f.Source})
	}
	for i, m := range p.Job.Models {
		v.Models = append(v.Models, modelView{
			Suffix: p.Job.Settings.Cosmologies[i].Suffix, AgeGyr: known(m.Age()), HubbleDistance: known(m.HubbleDistance()),
			ParticleHorizon: known(m.ParticleHorizon()), EventHorizon: known(m.EventHorizon()),
			ZHubbleSphere: known(m.HubbleSphereRedshift()), ZEventHorizon: known(m.EventHorizonRedshift()),
		})
	}
	return v
}

// known is nil for what JSON cannot say.
func known(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

func planText(w io.Writer, p *pipeline.Plan) error {
	if p.Job.Title != "" {
		fmt.Fprintf(w, "%s\n\n", p.Job.Title)
	}
	fmt.Fprintf(w, "config hash  %s\n", p.ConfigHash)
	for i, m := range p.Job.Models {
		fmt.Fprintf(w, "cosmology    %s\n", modelText(m, p.Job.Settings.Cosmologies[i].Suffix))
	}
	fmt.Fprintf(w, "\n%s, %s of input\n", plural(len(p.Units), "unit"), bytesText(p.Size()))
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, u := range p.Units {
		fmt.Fprintf(t, "  %s\t→ %s\t%s\n", u.Input, u.Output, bytesText(u.Size))
	}
	fmt.Fprintf(t, "\nreads\n")
	for _, n := range p.Kernel.Needs() {
		fmt.Fprintf(t, "  %s\t%s\n", n.Column, n.Role)
	}
	fmt.Fprintf(t, "\nterms\n")
	for _, line := range p.Kernel.Sources() {
		fmt.Fprintf(t, "  %s\n", line)
	}
	fmt.Fprintf(t, "\nadds\n")
	for _, f := range p.Kernel.Added() {
		fmt.Fprintf(t, "  %s\t%s\t%s\n", f.Name, f.Unit, f.Description)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, warning := range p.Warnings {
		fmt.Fprintf(w, "\nwarning: %s\n", warning)
	}
	return nil
}

// modelText is a cosmology on one line.
func modelText(m *cosmo.Model, suffix string) string {
	p := m.Params()
	parts := []string{fmt.Sprintf("H0 %g, Omega_m %g, Omega_de %.6g", p.H0, p.OmegaM, m.OmegaDE())}
	if !p.Flat {
		parts = append(parts, fmt.Sprintf("Omega_k %.6g", m.OmegaK()))
	}
	if p.W0 != -1 || p.Wa != 0 {
		parts = append(parts, fmt.Sprintf("w0 %g, wa %g", p.W0, p.Wa))
	}
	parts = append(parts, fmt.Sprintf("age %.4g Gyr", m.Age()), fmt.Sprintf("Hubble distance %.5g Mpc", m.HubbleDistance()),
		"event horizon "+distanceText(m.EventHorizon()), "particle horizon "+distanceText(m.ParticleHorizon()))
	if suffix != "" {
		parts = append(parts, fmt.Sprintf("columns end in %q", suffix))
	}
	return strings.Join(parts, ", ")
}

func distanceText(mpc float64) string {
	if math.IsInf(mpc, 1) {
		return "none"
	}
	return fmt.Sprintf("%.5g Mpc", mpc)
}
