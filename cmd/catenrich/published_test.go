package main

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"
)

// enrich runs the columns of one redshift under a [[cosmology]], and returns
// the row.
func enrich(t *testing.T, model, unit string, z float64) map[string]string {
	t.Helper()
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", fmt.Sprintf("z\n%v\n", z))
	writeFile(t, "job.toml", fmt.Sprintf("input.files = [\"in.csv\"]\ncolumns.redshift = \"z\"\nadd.columns = [\"all\"]\nadd.length_unit = %q\noutput.file = \"out.csv\"\n%s", unit, model))
	mustRun(t, "run", "job.toml", "--quiet")
	return readCSV(t, "out.csv")[0]
}

const (
	planck18     = "[[cosmology]]\nset = \"planck2018\"\n"
	wmap9Set     = "[[cosmology]]\nset = \"wmap9\"\n"
	seventy30    = "[[cosmology]]\nset = \"seventy-thirty\"\n"
	einsteinDeS  = "[[cosmology]]\nh0 = 70\nomega_m = 1\n"
	openUniverse = "[[cosmology]]\nh0 = 70\nomega_m = 0.3\nomega_de = 0\n"
)

// TestPublished takes the worked values of published_checks.csv that speak of
// columns through the run command. That file names each one's source, and how
// far it was checked; quantity is its first column.
func TestPublished(t *testing.T) {
	const c, hubble = 299792.458, 299792.458 / 70 // km/s, and Mpc
	sources := make(map[string]string)
	for _, r := range readCSV(t, filepath.Join(referenceDir, "published_checks.csv")) {
		sources[r["quantity"]] = r["source"]
	}
	// D_M of an open model without dark energy: Mattig 1958, with q0 = Om/2.
	mattig := func(om, z float64) float64 {
		return hubble * 2 * (om*z + (om-2)*(math.Sqrt(1+om*z)-1)) / (om * om * (1 + z))
	}
	for _, p := range []struct {
		quantity  string
		model     string
		unit      string
		z         float64
		column    string
		per       float64 // the column is divided by it
		low, high float64
	}{
		{"Age of the Universe", planck18, "Mpc", 0, "age_at_emission", 1, 13.767, 13.807},
		{"Age (WMAP9+eCMB+BAO+H0)", wmap9Set, "Mpc", 0, "age_at_emission", 1, 13.713, 13.831},
		{"Proper distance now to z = 10.957", planck18, "Glyr", 10.957, "comoving_distance", 1, 31.5, 32.5},
		{"Age at z = 10.957", planck18, "Mpc", 10.957, "age_at_emission", 1e-3, 400, 420},
		{"Distance at emission for z = 10.957", planck18, "Glyr", 10.957, "emission_distance", 1, 2.65, 2.75},
		{"Light travel time for z = 10.957", planck18, "Mpc", 10.957, "lookback_time", 1, 13.35, 13.45},
		{"Age at z = 14.32", planck18, "Mpc", 14.32, "age_at_emission", 1e-3, 285, 295},
		{"100 theta_*", planck18, "Mpc", 1089.8, "comoving_distance", 100 * 144.57, 1 / 1.0414, 1 / 1.0408},
		{"Recession velocity of the last-scattering surface", planck18, "Mpc", 1089.8, "recession_velocity_now", c, 3.1, 3.2},
		{"Recession of the z = 1100 surface in 0.3/0.7 without radiation", seventy30, "Mpc", 1100, "recession_velocity_now", c, 3.15, 3.25},
		{"Recession of the z = 1100 surface in 0.3/0.7 without radiation", seventy30, "Mpc", 1100, "recession_velocity_at_emission", c, 58.05, 58.15},
		{"Redshift with recession velocity c today", seventy30, "Mpc", 1.46, "recession_velocity_now", c, 0.999, 1.003},
		{"Einstein-de Sitter age", einsteinDeS, "Mpc", 0, "age_at_emission", 2. / 3 * 977.7922216807891 / 70, 1 - 1e-14, 1 + 1e-14},
		{"Einstein-de Sitter z with v = c today / at emission", einsteinDeS, "Mpc", 3, "recession_velocity_now", c, 1 - 1e-14, 1 + 1e-14},
		{"Einstein-de Sitter z with v = c today / at emission", einsteinDeS, "Mpc", 1.25, "recession_velocity_at_emission", c, 1 - 1e-14, 1 + 1e-14},
		{"70/30 age", seventy30, "Mpc", 0, "age_at_emission", 2 / (3 * math.Sqrt(0.7)) * math.Asinh(math.Sqrt(0.7/0.3)) * 977.7922216807891 / 70, 1 - 1e-14, 1 + 1e-14},
		{"Open Om = 0.3 D_M", openUniverse, "Mpc", 0.7, "transverse_comoving_distance", mattig(0.3, 0.7), 1 - 1e-13, 1 + 1e-13},
		{"Open Om = 0.3 D_M", openUniverse, "Mpc", 20, "transverse_comoving_distance", mattig(0.3, 20), 1 - 1e-13, 1 + 1e-13},
		{"Velocity drift in 70/30 at z = 1 and 4", seventy30, "Mpc", 1, "velocity_drift", 1, 0.255, 0.265},
		{"Velocity drift in 70/30 at z = 1 and 4", seventy30, "Mpc", 4, "velocity_drift", 1, -0.515, -0.505},
	} {
		t.Run(strings.ReplaceAll(p.quantity, "/", " over "), func(t *testing.T) {
			source, ok := sources[p.quantity]
			if !ok {
				t.Fatalf("published_checks.csv has no %q", p.quantity)
			}
			got := parse(t, enrich(t, p.model, p.unit, p.z)[p.column]) / p.per
			if !(got >= p.low && got <= p.high) {
				t.Errorf("%s at z = %v is %.12g, want %v to %v (%s)", p.column, p.z, got, p.low, p.high, source)
			}
		})
	}
}

// TestPublishedTurns holds where a column changes, by its values on both
// sides; the sources are those of published_checks.csv.
func TestPublishedTurns(t *testing.T) {
	for _, p := range []struct {
		quantity, model, column string
		below, above            float64 // redshifts on both sides of the published one
	}{
		{"Redshift with recession velocity c today", seventy30, "superluminal_now", 1.45, 1.47},
		{"Redshift at the event horizon today", seventy30, "beyond_event_horizon", 1.75, 1.85},
		{"Einstein-de Sitter z with v = c today / at emission", einsteinDeS, "superluminal_now", 2.9999, 3.0001},
		{"Einstein-de Sitter z with v = c today / at emission", einsteinDeS, "superluminal_at_emission", 1.2499, 1.2501},
	} {
		below, above := enrich(t, p.model, "Mpc", p.below)[p.column], enrich(t, p.model, "Mpc", p.above)[p.column]
		if below != "false" || above != "true" {
			t.Errorf("%s: %s is %s at z = %v and %s at z = %v", p.quantity, p.column, below, p.below, above, p.above)
		}
	}
	t.Run("drift", func(t *testing.T) { // "Redshift where dz/dt0 changes sign, about 2" (Loeb 1998; Liske et al. 2008, from memory)
		if at2, at22 := parse(t, enrich(t, seventy30, "Mpc", 2)["redshift_drift"]), parse(t, enrich(t, seventy30, "Mpc", 2.2)["redshift_drift"]); !(at2 > 0 && at22 < 0) {
			t.Errorf("the drift is %v at z = 2 and %v at z = 2.2", at2, at22)
		}
	})
	t.Run("largest D_A", func(t *testing.T) { // "Einstein-de Sitter z of largest D_A, 1.25", closed form
		at := func(z float64) float64 {
			return parse(t, enrich(t, einsteinDeS, "Mpc", z)["angular_diameter_distance"])
		}
		if top := at(1.25); !(top > at(1.24) && top > at(1.26)) {
			t.Errorf("D_A = %v at z = 1.25, %v at 1.24, %v at 1.26", top, at(1.24), at(1.26))
		}
	})
}
