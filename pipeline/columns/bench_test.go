package columns

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/table"
)

// twoBands is a job with all that a catalogue of two bands can ask for:
// heliocentric redshifts turned to the CMB frame by position, peculiar
// velocities, synthetic K-corrections, errors, quantiles, and a selection in
// both bands.
const twoBands = `
add.columns = [ADDED]
[columns]
redshift = "z"
redshift_error = "z_err"
redshift_lower = "z_lo"
redshift_upper = "z_hi"
right_ascension = "ra"
declination = "dec"
ebv = "ebv"
ebv_error = "ebv_err"
[redshift]
frame = "heliocentric"
distances_in = "cmb"
peculiar_velocity_sigma = 250
[[cosmology]]
set = "planck2018"
[[band]]
name = "r"
magnitude = "mag_r"
magnitude_error = "magerr_r"
extinction = 2.285
k_correction = { sed = "DIR/sed.csv", bandpass = "DIR/r.csv" }
evolution = { q = 0.8, z0 = 0.1 }
solar_absolute_magnitude = 4.65
[[band]]
name = "i"
flux = "flux_i"
flux_unit = "nanomaggies"
flux_ivar = "ivar_i"
extinction = 1.698
k_correction = { sed = "DIR/sed.csv", bandpass = "DIR/i.csv" }
evolution = { q = 0.8, z0 = 0.1 }
solar_absolute_magnitude = 4.53
[[selection]]
name = "main"
limits_on = "corrected"
area = 1200
redshift = [0.005, 1.0]
limit = [{ band = "r", faint = 20.0BRIGHT }, { band = "i", faint = 20.0BRIGHT }]
[[volume_limited]]
name = "bright"
band = "r"
brighter_than = -21.0
redshift = [0.02, 0.2]
`

// survey binds twoBands, with added columns and something more for its limits,
// to a batch. The files that the job names are made.
func survey(t testing.TB, added, bright string, rows int) *bench {
	t.Helper()
	dir := t.TempDir()
	for name, text := range map[string]string{"sed.csv": spectrum(), "r.csv": bandpass(5500, 7000), "i.csv": bandpass(7000, 8500)} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	text := strings.NewReplacer("BRIGHT", bright, "DIR", dir, "ADDED", added).Replace(twoBands)
	rng := rand.New(rand.NewPCG(9, 9))
	z := make([]float64, rows)
	for i := range z {
		z[i] = float64(float32(math.Pow(10, -1.7+1.4*rng.Float64())))
	}
	return bind(t, text, rows, func(column string, row int, c *table.Column) {
		c.SetFloat(row, cells[column](z[row], rng))
	})
}

// cells makes a cell of each column of the catalogue, given the redshift.
var cells = map[string]func(z float64, rng *rand.Rand) float64{
	"z":        func(z float64, _ *rand.Rand) float64 { return z },
	"z_err":    func(_ float64, _ *rand.Rand) float64 { return 0.004 },
	"z_lo":     func(z float64, _ *rand.Rand) float64 { return z - 0.004 },
	"z_hi":     func(z float64, _ *rand.Rand) float64 { return z + 0.005 },
	"ra":       func(_ float64, rng *rand.Rand) float64 { return 360 * rng.Float64() },
	"dec":      func(_ float64, rng *rand.Rand) float64 { return 180*rng.Float64() - 90 },
	"ebv":      func(_ float64, rng *rand.Rand) float64 { return 0.1 * rng.Float64() },
	"ebv_err":  func(_ float64, _ *rand.Rand) float64 { return 0.01 },
	"mag_r":    func(_ float64, rng *rand.Rand) float64 { return 20.2 - 4*rng.Float64() },
	"magerr_r": func(_ float64, _ *rand.Rand) float64 { return 0.02 },
	"flux_i":   func(_ float64, rng *rand.Rand) float64 { return math.Pow(10, 0.95+1.5*rng.Float64()) },
	"ivar_i":   func(_ float64, _ *rand.Rand) float64 { return 4 },
}

// spectrum is an SED of some thousand points with a break and a line.
func spectrum() string {
	var b strings.Builder
	for w := 1000.0; w < 12000; w *= 1.001 {
		f := math.Pow(w/5000, -0.5) * (1 + 0.05*math.Sin(w/40))
		if w < 4000 {
			f *= 0.5
		}
		fmt.Fprintf(&b, "%.6f %.9f\n", w, f+0.6*math.Exp(-math.Pow((w-5000)/15, 2)))
	}
	return b.String()
}

func bandpass(from, to float64) string {
	var b strings.Builder
	for w := from; w <= to; w += (to - from) / 80 {
		fmt.Fprintf(&b, "%.6f %.9f\n", w, math.Sin((w-from)/(to-from)*math.Pi)+1e-3)
	}
	return b.String()
}

// groups are what is measured. What one costs is its time less that of those
// that it builds on.
var groups = []struct{ name, added, bright string }{
	{"frames", `"cosmological_redshift"`, ""},
	{"positions", `"cosmological_redshift", "positions"`, ""},
	{"section 2", `"distances", "times", "volumes", "recession", "redshifts", "positions"`, ""},
	{"modulus", `"distance_modulus"`, ""},
	{"photometry", `"distance_modulus", "photometry"`, ""},
	{"errors", `"luminosity_distance", "distance_modulus", "photometry", "errors"`, ""},
	{"intervals", `"luminosity_distance", "distance_modulus", "photometry", "intervals"`, ""},
	{"selection", `"distance_modulus", "photometry", "selection"`, ""},
	{"selection, bright limits", `"distance_modulus", "photometry", "selection"`, ", bright = 13.0"},
	{"every value", `"all"`, ""},
	{"values and errors", `"all", "errors"`, ""},
	{"everything", `"all", "errors", "intervals"`, ""},
}

// BenchmarkGroups is one core's time for groups of columns of two bands, from
// decoded cells to computed ones, without the counting and with it.
func BenchmarkGroups(b *testing.B) {
	const rows = 8192
	for _, g := range groups {
		w := survey(b, g.added, g.bright, rows)
		for name, run := range map[string]func(){"kernel": w.computeOnly, "counted": w.run} {
			b.Run(g.name+"/"+name, func(b *testing.B) {
				b.ReportAllocs()
				run()
				before := processorTime(b)
				for b.Loop() {
					run()
				}
				b.ReportMetric(float64((processorTime(b)-before).Nanoseconds())/float64(b.N)/rows, "cpu-ns/row")
				b.ReportMetric(float64(len(w.batch.Out)), "columns")
			})
		}
	}
}

// TestEverythingAllocatesNothing once its scratch is warm.
func TestEverythingAllocatesNothing(t *testing.T) {
	w := survey(t, `"all", "errors", "intervals"`, ", bright = 13.0", span+100)
	w.run()
	if n := testing.AllocsPerRun(3, w.run); n > 0 {
		t.Errorf("%v allocations a batch", n)
	}
}
