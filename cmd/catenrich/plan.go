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
	"catenrich/pipeline/job"
)

func (a *app) planCommand() *cobra.Command {
	var asJSON bool
	var shares int
	var settings jobFlags
	c := &cobra.Command{
		Use:   "plan [JOB.toml | FILES…]",
		Short: "Show what run would do, and write nothing",
		Long: `Show a job as a page: its units with their sizes, whether each is up to date and
if not why; the cosmologies with ages and horizons; which columns are read, where
each term comes from, and which columns are added; the config hash; warnings. The
first input of each format is opened, and its first rows are computed to estimate
the size of the outputs. Nothing is written. Of more than 10 000 units the outputs are
not looked at: gather does that.`,
		Example: `  catenrich plan nightly.toml
  catenrich plan nightly.toml --shares 8
  catenrich plan survey.csv --redshift z --add distances -o enriched.csv
  catenrich plan nightly.toml --json | jq -r .config_hash
  catenrich plan nightly.toml --json | jq '.units[] | select(.state != "up to date")'`,
		RunE: func(c *cobra.Command, args []string) error {
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
			found, err := plan.Inspect(c.Context())
			if err != nil {
				return err
			}
			view := viewPlan(plan, found)
			if asJSON {
				view.Shares = shareViews(plan, shares)
				return printJSON(a.stdout, view)
			}
			return errors.Join(view.print(a.stdout), sharesText(a.stdout, plan, shares))
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print JSON")
	c.Flags().IntVar(&shares, "shares", 0, "also show how the units would be dealt to so many shares (run --share I/N)")
	settings.register(c.Flags())
	return c
}

// planView is the plan, as JSON and as what the page shows.
type planView struct {
	Title       string                 `json:"title"`
	ConfigHash  string                 `json:"config_hash"`
	InputBytes  int64                  `json:"input_bytes"`
	OutputBytes *int64                 `json:"estimated_output_bytes"` // null where it cannot be told
	States      map[string]int         `json:"units_by_state"`
	Units       []unitView             `json:"units"`
	Models      []modelView            `json:"models"`
	Reads       []readView             `json:"reads"`
	Terms       []string               `json:"terms"`
	Added       []pipeline.Description `json:"columns"`
	Warnings    []string               `json:"warnings"`
	Settings    json.RawMessage        `json:"settings"`
	Shares      []shareView            `json:"shares,omitempty"`
}

type unitView struct {
	ID        string `json:"id"`
	Input     string `json:"input"`
	Output    string `json:"output"`
	Bytes     int64  `json:"bytes"`
	Estimated *int64 `json:"estimated_output_bytes"`
	State     string `json:"state"`
	Reason    string `json:"reason"`
}

type readView struct {
	Column string   `json:"column"`
	Role   job.Role `json:"role"`
}

// modelView is one cosmology in numbers; null where a quantity is infinite or
// does not exist.
type modelView struct {
	Suffix             string   `json:"suffix"`
	Parameters         string   `json:"parameters"`
	AgeGyr             *float64 `json:"age_gyr"`
	HubbleTime         *float64 `json:"hubble_time_gyr"`
	HubbleDistance     *float64 `json:"hubble_distance_mpc"`
	HubbleDistanceGly  *float64 `json:"hubble_distance_gly"`
	EventHorizon       *float64 `json:"event_horizon_mpc"`
	EventHorizonGly    *float64 `json:"event_horizon_gly"`
	ParticleHorizon    *float64 `json:"particle_horizon_mpc"`
	ParticleHorizonGly *float64 `json:"particle_horizon_gly"`
	ZHubbleSphere      *float64 `json:"z_hubble_sphere"`
	ZEventHorizon      *float64 `json:"z_event_horizon"`
}

func viewPlan(p *pipeline.Plan, found *pipeline.Inspection) *planView {
	v := &planView{
		Title: p.Job.Title, ConfigHash: p.ConfigHash, InputBytes: p.Size(), States: map[string]int{}, Terms: p.Kernel.Sources(),
		Added: p.Describe(), Warnings: append([]string{}, p.Warnings...), Settings: p.Settings,
	}
	total, whole := int64(0), true
	for i, u := range p.Units {
		view := unitView{ID: u.ID, Input: u.Input, Output: u.Output, Bytes: u.Size, State: found.States[i], Reason: found.Reasons[i]}
		if size := found.Estimates[i]; size >= 0 {
			view.Estimated = &size
			total += size
		} else {
			whole = false
		}
		v.States[view.State]++
		v.Units = append(v.Units, view)
	}
	if whole {
		v.OutputBytes = &total
	}
	for _, n := range p.Kernel.Needs() {
		v.Reads = append(v.Reads, readView{n.Column, n.Role})
	}
	for i, m := range p.Job.Models {
		v.Models = append(v.Models, viewModel(m, p.Job.Settings.Cosmologies[i].Suffix))
	}
	return v
}

func viewModel(m *cosmo.Model, suffix string) modelView {
	return modelView{
		Suffix: suffix, Parameters: parameters(m), AgeGyr: known(m.Age()), HubbleTime: known(m.HubbleTime()),
		HubbleDistance: known(m.HubbleDistance()), HubbleDistanceGly: known(gly(m.HubbleDistance())),
		EventHorizon: known(m.EventHorizon()), EventHorizonGly: known(gly(m.EventHorizon())),
		ParticleHorizon: known(m.ParticleHorizon()), ParticleHorizonGly: known(gly(m.ParticleHorizon())),
		ZHubbleSphere: known(m.HubbleSphereRedshift()), ZEventHorizon: known(m.EventHorizonRedshift()),
	}
}

// gly turns Mpc into billions of light years.
func gly(mpc float64) float64 { return mpc * (1e6 * cosmo.Parsec) / (1e9 * cosmo.LightYear) }

// known is nil for what JSON cannot say.
func known(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

// parameters are those of a model, in words.
func parameters(m *cosmo.Model) string {
	p := m.Params()
	curvature := "flat"
	if !p.Flat {
		curvature = fmt.Sprintf("Omega_k %.6g", m.OmegaK())
	}
	parts := []string{fmt.Sprintf("H0 %g km/s/Mpc, Omega_m %g, Omega_de %.6g, %s", p.H0, p.OmegaM, m.OmegaDE(), curvature)}
	if p.W0 != -1 || p.Wa != 0 {
		parts = append(parts, fmt.Sprintf("w0 %g, wa %g", p.W0, p.Wa))
	}
	if p.TCMB == 0 {
		return strings.Join(append(parts, "no radiation"), ", ")
	}
	parts = append(parts, fmt.Sprintf("CMB at %g K, N_eff %g", p.TCMB, p.Neff))
	if len(p.NeutrinoMasses) > 0 {
		parts = append(parts, fmt.Sprintf("neutrinos of %s eV", strings.Trim(strings.Join(strings.Fields(fmt.Sprint(p.NeutrinoMasses)), ", "), "[]")))
	}
	return strings.Join(parts, ", ")
}

// print writes the page.
func (v *planView) print(w io.Writer) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	if v.Title != "" {
		fmt.Fprintf(t, "%s\n\n", v.Title)
	}
	fmt.Fprintf(t, "config hash  %s\n", v.ConfigHash)
	v.printUnits(t)
	for i := range v.Models {
		v.Models[i].print(t)
	}
	fmt.Fprintf(t, "\nreads\n")
	for _, r := range v.Reads {
		fmt.Fprintf(t, "  %s\t%s\n", r.Column, r.Role)
	}
	fmt.Fprintf(t, "\nterms\n")
	for _, line := range v.Terms {
		fmt.Fprintf(t, "  %s\n", line)
	}
	fmt.Fprintf(t, "\nadds %s\n", plural(len(v.Added), "column"))
	for _, c := range v.Added {
		unit := c.Unit
		if unit == "" {
			unit = "-"
		}
		fmt.Fprintf(t, "  %s\t%s\t%s\n", c.Name, unit, c.Description)
	}
	fmt.Fprintf(t, "\n%s\n", plural(len(v.Warnings), "warning"))
	for _, warning := range v.Warnings {
		fmt.Fprintf(t, "  %s\n", warning)
	}
	return t.Flush()
}

// shownUnits is how many units a page lists.
const shownUnits = 40

func (v *planView) printUnits(w io.Writer) {
	var states []string
	for _, s := range []string{pipeline.StateToDo, pipeline.StateDone, pipeline.StateBlocked, pipeline.StateUnseen} {
		if n := v.States[s]; n > 0 {
			states = append(states, fmt.Sprintf("%d %s", n, s))
		}
	}
	fmt.Fprintf(w, "\n%s: %s; %s in, %s out\n", plural(len(v.Units), "unit"), strings.Join(states, ", "), bytesText(v.InputBytes), about(v.OutputBytes))
	for i, u := range v.Units {
		if more := len(v.Units) - i; i == shownUnits && more > 1 {
			fmt.Fprintf(w, "  and %d more, which --json lists\n", more)
			break
		}
		state := u.State
		if u.Reason != "" {
			state += ": " + u.Reason
		}
		fmt.Fprintf(w, "  %s\t→ %s\t%s\t→ %s\t%s\n", u.Input, u.Output, bytesText(u.Bytes), about(u.Estimated), state)
	}
}

// about is an estimated size, to two digits.
func about(size *int64) string {
	if size == nil {
		return "unknown"
	}
	step := int64(1)
	for *size/step >= 100 {
		step *= 10
	}
	return "about " + bytesText((*size+step/2)/step*step)
}

// print writes one cosmology: its parameters, its ages, and the three surfaces
// that the README tells apart.
func (m *modelView) print(w io.Writer) {
	suffix := ""
	if m.Suffix != "" {
		suffix = fmt.Sprintf(", for the columns that end in %q", m.Suffix)
	}
	fmt.Fprintf(w, "\ncosmology%s\n  %s\n", suffix, m.Parameters)
	fmt.Fprintf(w, "  age today\t%s\tHubble time %s\n", quantity("%.4g Gyr", m.AgeGyr), quantity("%.4g Gyr", m.HubbleTime))
	fmt.Fprintf(w, "  Hubble sphere\t%s\t%s\t%s\t(the Hubble distance: what is beyond it recedes faster than light)\n", quantity("%.5g Mpc", m.HubbleDistance), quantity("%.4g Gly", m.HubbleDistanceGly), quantity("z = %.4g", m.ZHubbleSphere))
	if m.EventHorizon == nil {
		fmt.Fprintf(w, "  event horizon\tnone\t\t\t(this model has none)\n")
	} else {
		fmt.Fprintf(w, "  event horizon\t%s\t%s\t%s\t(no signal sent today arrives beyond it)\n", quantity("%.5g Mpc", m.EventHorizon), quantity("%.4g Gly", m.EventHorizonGly), quantity("z = %.4g", m.ZEventHorizon))
	}
	fmt.Fprintf(w, "  particle horizon\t%s\t%s\t\t(nothing beyond it has been seen yet)\n", quantity("%.5g Mpc", m.ParticleHorizon), quantity("%.4g Gly", m.ParticleHorizonGly))
}

// quantity formats a number, or says that there is none.
func quantity(format string, v *float64) string {
	if v == nil {
		return "none"
	}
	return fmt.Sprintf(format, *v)
}
