package main

import (
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"
)

// TestPlanOfUnits: what plan says of each unit's state and size is what run
// then does.
func TestPlanOfUnits(t *testing.T) {
	t.Chdir(t.TempDir())
	mustRun(t, "demo", "d", "--rows", "4000", "--quiet")
	plan := func(args ...string) planView {
		t.Helper()
		var v planView
		if err := json.Unmarshal([]byte(mustRun(t, append(args, "--json")...).stdout), &v); err != nil {
			t.Fatal(err)
		}
		return v
	}
	v := plan("plan", "d/quill_ridge.toml")
	for _, u := range v.Units {
		if u.State != "up to date" || u.Reason != "" || u.Estimated == nil {
			t.Errorf("%+v", u)
			continue
		}
		info, err := os.Stat(u.Output)
		if err != nil {
			t.Fatal(err)
		}
		if off := math.Abs(float64(*u.Estimated)/float64(info.Size()) - 1); off > 0.1 {
			t.Errorf("%s has %d bytes, and %d were expected", u.Output, info.Size(), *u.Estimated)
		}
	}
	if v.OutputBytes == nil || v.States["up to date"] != 2 {
		t.Errorf("%v, output %v", v.States, v.OutputBytes)
	}

	for _, c := range []struct {
		name          string
		do            func()
		state, reason string
	}{
		{"the output is gone", func() { os.Remove("d/enriched/quill_ridge.csv") }, "to write", "output is missing"},
		{"its description is gone", func() { os.Remove("d/enriched/quill_ridge.csv.columns.csv") }, "to write", "a sidecar"},
		{"the input changed", func() { appendTo(t, "d/quill_ridge.csv", "\n") }, "to write", "its input has changed"},
		{"somebody else's file", func() { os.RemoveAll("d/enriched"); writeFile(t, "d/enriched/quill_ridge.csv", "x") }, "blocked", "--replace"},
	} {
		mustRun(t, "run", "d/quill_ridge.toml", "--quiet")
		c.do()
		if u := plan("plan", "d/quill_ridge.toml").Units[0]; u.State != c.state || !strings.Contains(u.Reason, c.reason) {
			t.Errorf("%s: %s: %s, want %s: …%s…", c.name, u.State, u.Reason, c.state, c.reason)
		}
	}
	mustRun(t, "run", "d/quill_ridge.toml", "--quiet", "--replace")
	if u := plan("plan", "d/quill_ridge.toml", "--length-unit", "Gpc").Units[0]; u.State != "to write" || !strings.Contains(u.Reason, "another job") {
		t.Errorf("another job: %s: %s", u.State, u.Reason)
	}
}

// appendTo changes a file behind its end.
func appendTo(t *testing.T, path, text string) {
	t.Helper()
	writeFile(t, path, string(readFile(t, path))+text)
}

// TestPlanOfModels: the ages and horizons of a universe without radiation that
// textbooks give in closed form, and of one that has no horizons.
func TestPlanOfModels(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "z\n0.5\n")
	model := func(flags ...string) modelView {
		t.Helper()
		var v planView
		args := append([]string{"plan", "in.csv", "--redshift", "z", "--add", "times", "-o", "out.csv", "--json"}, flags...)
		if err := json.Unmarshal([]byte(mustRun(t, args...).stdout), &v); err != nil {
			t.Fatal(err)
		}
		return v.Models[0]
	}
	// Einstein-de Sitter: age 2/3 t_H, particle horizon 2 c/H0, no event horizon,
	// and the Hubble sphere where 2 (1 - x^-1/2) = 1, x = 4 (Hogg 1999, eq. 15).
	// 1 Mpc is 3.2615637772e6 light years (IAU 2012 B2, 2015 B2).
	m := model("--h0", "70", "--omega-m", "1")
	const hubble = 299792.458 / 70
	for _, c := range []struct {
		name      string
		got       *float64
		want, tol float64
	}{
		{"age over Hubble time", ratio(m.AgeGyr, m.HubbleTime), 2. / 3, 1e-12},
		{"Hubble time, Gyr", m.HubbleTime, 977.792 / 70, 1e-5}, // 977.792 Gyr km/s/Mpc: from memory
		{"Hubble distance", m.HubbleDistance, hubble, 1e-12},
		{"Hubble distance, Gly", m.HubbleDistanceGly, hubble * 3.2615637772e-3, 1e-9},
		{"particle horizon", m.ParticleHorizon, 2 * hubble, 1e-10},
		{"particle horizon, Gly", m.ParticleHorizonGly, 2 * hubble * 3.2615637772e-3, 1e-9},
		{"redshift of the Hubble sphere", m.ZHubbleSphere, 3, 1e-9},
	} {
		if c.got == nil || math.Abs(*c.got/c.want-1) > c.tol {
			t.Errorf("%s is %v, want %v", c.name, value(c.got), c.want)
		}
	}
	if m.EventHorizon != nil || m.EventHorizonGly != nil || m.ZEventHorizon != nil {
		t.Errorf("an event horizon at %v", value(m.EventHorizon))
	}
	page := mustRun(t, "plan", "in.csv", "--redshift", "z", "--add", "times", "-o", "out.csv", "--h0", "70", "--omega-m", "1").stdout
	if !strings.Contains(page, "event horizon     none") || !strings.Contains(page, "27.94 Gly") {
		t.Errorf("the page says\n%s", page)
	}
}

func ratio(a, b *float64) *float64 {
	if a == nil || b == nil {
		return nil
	}
	r := *a / *b
	return &r
}

func value(v *float64) any {
	if v == nil {
		return "none"
	}
	return *v
}

func TestAbout(t *testing.T) {
	for size, want := range map[int64]string{7: "about 7 bytes", 99: "about 99 bytes", 114: "about 110 bytes", 1_550_000: "about 1.6 MB", 994_999: "about 990 kB", 12_345_678_901: "about 12 GB"} {
		if got := about(&size); got != want {
			t.Errorf("%d: %s, want %s", size, got, want)
		}
	}
}
