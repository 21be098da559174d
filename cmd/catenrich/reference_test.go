package main

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// The tables of testdata/reference have 20 digits; make_reference.py there
// says how they were made.
const referenceDir = "../../testdata/reference"

// promised is the relative accuracy that the columns are held to.
const promised = 1e-10

// readCSV reads a table with a header, without its comment lines.
func readCSV(t testing.TB, path string) []map[string]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment, r.LazyQuotes = '#', true
	records, err := r.ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	var rows []map[string]string
	for _, record := range records[1:] {
		row := make(map[string]string)
		for i, name := range records[0] {
			row[name] = record[i]
		}
		rows = append(rows, row)
	}
	if len(rows) == 0 {
		t.Fatalf("%s has no rows", path)
	}
	return rows
}

// parse reads a number; "none" and an empty field are NaN.
func parse(t testing.TB, s string) float64 {
	t.Helper()
	if s == "none" || s == "" {
		return math.NaN()
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// referenceModel writes the [[cosmology]] of a row of models.csv.
func referenceModel(r map[string]string) string {
	model := fmt.Sprintf("[[cosmology]]\nh0 = %s\nomega_m = %s\nw0 = %s\nwa = %s\n", r["H0_km_s_mpc"], r["Om"], r["w0"], r["wa"])
	if flat := []string{"seventy_thirty", "planck2018", "wmap9", "wcdm", "cpl_a", "cpl_b"}; !slices.Contains(flat, r["model"]) {
		model += "omega_de = " + r["Ode"] + "\n"
	}
	if r["Tcmb_K"] != "0.0" {
		model += "cmb_temperature = " + r["Tcmb_K"] + "\neffective_neutrinos = " + r["Neff"] + "\n"
	}
	if masses := r["m_nu_eV"]; masses != "" {
		model += "neutrino_masses = [" + strings.ReplaceAll(masses, ";", ", ") + "]\n"
	}
	return model
}

// TestReference takes every model, redshift and quantity of the reference
// tables through the run command.
func TestReference(t *testing.T) {
	dir, err := filepath.Abs(referenceDir)
	if err != nil {
		t.Fatal(err)
	}
	horizons := make(map[string]float64)
	for _, r := range readCSV(t, filepath.Join(dir, "scalars.csv")) {
		horizons[r["model"]] = parse(t, r["event_horizon_mpc"])
	}
	sets := map[string]string{"planck2018": "planck2018", "wmap9": "wmap9", "seventy_thirty": "seventy-thirty"}
	for _, r := range readCSV(t, filepath.Join(dir, "models.csv")) {
		name := r["model"]
		reference := readCSV(t, filepath.Join(dir, name+".csv"))
		c := comparison{hubble: 299792.458 / parse(t, r["H0_km_s_mpc"]), ok: parse(t, r["Ok"]), horizon: horizons[name]}
		t.Run(name, func(t *testing.T) { c.run(t, referenceModel(r), reference) })
		if set, ok := sets[name]; ok {
			t.Run("set "+set, func(t *testing.T) { c.run(t, "[[cosmology]]\nset = \""+set+"\"\n", reference) })
		}
	}
}

// A comparison is between the output for one model and its reference table.
type comparison struct {
	hubble  float64 // Hubble distance, Mpc
	ok      float64
	horizon float64 // Mpc; NaN where there is none

	worst      float64 // largest error, as a part of what is promised
	worstPlace string
	checked    int
}

// run enriches the table's redshifts and compares row by row.
func (c comparison) run(t *testing.T, model string, reference []map[string]string) {
	t.Chdir(t.TempDir())
	text := "z\n"
	for _, r := range reference {
		text += r["z"] + "\n"
	}
	writeFile(t, "in.csv", text)
	writeFile(t, "job.toml", `
input.files = ["in.csv"]
columns.redshift = "z"
redshift.negative = "signed"
add.columns = ["distances", "times", "volumes", "recession", "redshifts"]
output.file = "out.csv"
`+model)
	mustRun(t, "run", "job.toml", "--quiet")
	rows := readCSV(t, "out.csv")
	if len(rows) != len(reference) {
		t.Fatalf("%d rows came out of %d", len(rows), len(reference))
	}
	largest := 0.0
	for i, r := range reference {
		largest = max(largest, math.Abs(parse(t, r["dm_mpc"])))
		c.row(t, rows[i], r, largest)
	}
	if c.checked < 16*len(rows) {
		t.Errorf("only %d cells were compared", c.checked)
	}
	t.Logf("largest error %.2g of what is allowed, %s", c.worst, c.worstPlace)
}

// row compares one row. Errors are relative, but for quantities that cross
// zero: the modulus, the drifts, and distances past a closed model's equator,
// which are held to the largest distance so far.
func (c *comparison) row(t *testing.T, got, r map[string]string, largest float64) {
	const (
		light  = 299792.458        // km/s
		gyr    = 977.7922216807891 // Mpc/(km/s) in Gyr: 1e6 x 648000/pi x 149597870.7 km / (31557600e9 s)
		h0Year = 1 / (gyr * 1e9)   // 1 km/s/Mpc in 1/yr
	)
	z, e := parse(t, r["z"]), parse(t, r["E"])
	x, h0 := 1+z, light/c.hubble*h0Year
	past, pastVolume := 0.0, 0.0
	if c.ok < 0 && math.Sqrt(-c.ok)*parse(t, r["vrec_now_c"]) > math.Pi/2 {
		past, pastVolume = largest, largest*largest*c.hubble/e
	}
	c.cell(t, got, r, "comoving_distance", "dc_mpc", 1, 0)
	c.cell(t, got, r, "transverse_comoving_distance", "dm_mpc", 1, past)
	c.cell(t, got, r, "angular_diameter_distance", "da_mpc", 1, past/x)
	c.cell(t, got, r, "luminosity_distance", "dl_mpc", 1, past*x)
	c.cell(t, got, r, "emission_distance", "dprop_em_mpc", 1, 0)
	c.cell(t, got, r, "distance_modulus", "mu_mag", 1, 2.2)
	c.cell(t, got, r, "angular_scale", "kpc_per_arcsec", 1, past/x*1e3*math.Pi/648000)
	c.cell(t, got, r, "lookback_time", "lookback_gyr", 1, 0)
	c.cell(t, got, r, "age_at_emission", "age_gyr", 1, 0)
	c.cell(t, got, r, "contact_lost_age", "t_exit_gyr", 1, 0)
	c.cell(t, got, r, "comoving_volume", "vc_mpc3", 1, 0)
	c.cell(t, got, r, "comoving_volume_element", "dvdz_mpc3_sr", 1, pastVolume)
	c.cell(t, got, r, "recession_velocity_now", "vrec_now_c", light, 0)
	c.cell(t, got, r, "recession_velocity_at_emission", "vrec_em_c", light, 0)
	c.cell(t, got, r, "redshift_drift", "zdot_per_yr", 1, h0*max(x, e))
	c.cell(t, got, r, "velocity_drift", "vdot_cm_s_yr", 1, h0*light*1e5*max(1, e/x))
	c.cell(t, got, r, "cosmological_redshift", "z", 1, 0)

	c.flag(t, got, r["z"], "superluminal_now", parse(t, r["vrec_now_c"]), 1)
	c.flag(t, got, r["z"], "superluminal_at_emission", parse(t, r["vrec_em_c"]), 1)
	c.flag(t, got, r["z"], "beyond_event_horizon", parse(t, r["dc_mpc"]), c.horizon)

	want := 0
	if z <= 0 {
		want |= 8
	}
	if z > 0 && (r["t_exit_gyr"] == "none" || r["mu_mag"] == "none") {
		want |= 2048
	}
	if status := got["enrich_status"]; status != strconv.Itoa(want) {
		t.Errorf("z = %s: enrich_status = %s, want %d", r["z"], status, want)
	}
}

// cell compares one cell with the reference's times unit. The error is
// relative to scale, or to the value where scale is 0.
func (c *comparison) cell(t *testing.T, got, r map[string]string, column, reference string, unit, scale float64) {
	want, text := parse(t, r[reference])*unit, got[column]
	if math.IsNaN(want) {
		if text != "" {
			t.Errorf("z = %s: %s = %s, want no value", r["z"], column, text)
		}
		return
	}
	if scale == 0 {
		scale = math.Abs(want)
	}
	wrong := math.Abs(parse(t, text)-want) / scale
	if scale == 0 && parse(t, text) == 0 {
		wrong = 0
	}
	if !(wrong <= promised) {
		t.Errorf("z = %s: %s = %s, want %.17g: wrong by %.2g of its scale", r["z"], column, text, want, wrong)
	}
	if wrong/promised > c.worst {
		c.worst, c.worstPlace = wrong/promised, column+" at z = "+r["z"]
	}
	c.checked++
}

// flag compares a flag with value > limit, unless both are equal to within
// what is promised, when either answer is right.
func (c *comparison) flag(t *testing.T, got map[string]string, z, column string, value, limit float64) {
	if math.Abs(value-limit) <= promised*limit {
		return
	}
	if want := strconv.FormatBool(value > limit); got[column] != want {
		t.Errorf("z = %s: %s = %q, want %s", z, column, got[column], want)
	}
	c.checked++
}
