package cosmo

import (
	"bufio"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// The tables of testdata/reference have 20 digits; make_reference.py there says
// how they were made.
const referenceDir = "../testdata/reference"

// aim is the accuracy that the tables are held to; 1e-10 is promised.
const aim = 1e-12

// readTable reads a reference file: its columns by name, as text.
func readTable(t testing.TB, name string) []map[string]string {
	t.Helper()
	f, err := os.Open(filepath.Join(referenceDir, name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var head []string
	var rows []map[string]string
	for s := bufio.NewScanner(f); s.Scan(); {
		if strings.HasPrefix(s.Text(), "#") {
			continue
		}
		cells := strings.Split(s.Text(), ",")
		if head == nil {
			head = cells
			continue
		}
		row := map[string]string{}
		for i, h := range head {
			row[h] = cells[i]
		}
		rows = append(rows, row)
	}
	if len(rows) == 0 {
		t.Fatalf("%s has no rows", name)
	}
	return rows
}

// number parses a reference value; "none" is NaN.
func number(t testing.TB, s string) float64 {
	t.Helper()
	if s == "none" {
		return math.NaN()
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// referenceParams reads the inputs of the reference models.
func referenceParams(t testing.TB) map[string]Params {
	t.Helper()
	flat := map[string]bool{"seventy_thirty": true, "planck2018": true, "wmap9": true, "wcdm": true, "cpl_a": true, "cpl_b": true}
	out := map[string]Params{}
	for _, r := range readTable(t, "models.csv") {
		p := Params{
			H0: number(t, r["H0_km_s_mpc"]), OmegaM: number(t, r["Om"]), W0: number(t, r["w0"]), Wa: number(t, r["wa"]),
			TCMB: number(t, r["Tcmb_K"]), Flat: flat[r["model"]],
		}
		if !p.Flat {
			p.OmegaDE = number(t, r["Ode"])
		}
		if p.TCMB > 0 {
			p.Neff = number(t, r["Neff"])
		}
		if r["m_nu_eV"] != "" {
			for _, s := range strings.Split(r["m_nu_eV"], ";") {
				p.NeutrinoMasses = append(p.NeutrinoMasses, number(t, s))
			}
		}
		out[r["model"]] = p
	}
	return out
}

func mustNew(t testing.TB, p Params) *Model {
	t.Helper()
	m, err := New(p)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// A claim is one computed value beside the reference's.
type claim struct {
	column    string
	got, want float64
	scale     float64 // errors are relative to it
}

// claims compares a row's quantities with every column of the reference that
// follows from them, with the scales of the project's accuracy promise.
func claims(t testing.TB, m *Model, v Values, r map[string]string, largestDM float64) []claim {
	z, e := number(t, r["z"]), number(t, r["E"])
	x := 1 + z
	dh, th := m.HubbleDistance(), m.HubbleTime()
	var out []claim
	add := func(column string, got, scale float64) {
		want := number(t, r[column])
		if scale == 0 {
			scale = math.Abs(want)
		}
		out = append(out, claim{column, got, want, scale})
	}
	h0 := 1 / (th * 1e9) // 1/yr
	add("E", v.E, 0)
	add("dc_mpc", dh*v.DC, 0)
	add("lookback_gyr", th*v.Lookback, 0)
	add("age_gyr", th*v.Age, 0)
	add("vc_mpc3", dh*dh*dh*v.Volume, 0)
	add("vrec_now_c", v.DC, 0)
	add("vrec_em_c", v.E*v.DC/x, 0)
	add("dprop_em_mpc", dh*v.DC/x, 0)
	// past the equator of a closed model, relative to the largest up to z
	past := 0.0
	if m.OmegaK() < 0 && v.Slope < 0 {
		past = largestDM
	}
	add("dm_mpc", dh*v.DM, past*dh)
	add("da_mpc", dh*v.DM/x, past*dh)
	add("dl_mpc", dh*v.DM*x, past*dh*x)
	add("dvdz_mpc3_sr", dh*dh*dh*v.DM*v.DM/v.E, past*past*dh*dh*dh/e)
	if r["mu_mag"] != "none" {
		add("mu_mag", 5*math.Log10(dh*v.DM*x*1e5), 2.2)
	}
	add("zdot_per_yr", v.Drift*h0, h0*max(x, e))
	add("vdot_cm_s_yr", v.Drift/x*h0*SpeedOfLight*1e5, h0*SpeedOfLight*1e5*max(1, e/x))
	if r["t_exit_gyr"] == "none" {
		if v.ContactLost == v.ContactLost {
			out = append(out, claim{"t_exit_gyr", v.ContactLost, math.NaN(), 1})
		}
	} else {
		add("t_exit_gyr", th*v.ContactLost, 0)
	}
	return out
}

// valuesAt takes a row of a filled base.
func valuesAt(b *Base, i int) Values {
	return Values{b.DC[i], b.DM[i], b.Slope[i], b.E[i], b.Lookback[i], b.Age[i], b.Volume[i], b.Drift[i], b.ContactLost[i]}
}

const everything = DC | DM | Slope | E | Lookback | Age | Volume | Drift | ContactLost

func TestReferenceTables(t *testing.T) {
	for name, p := range referenceParams(t) {
		t.Run(name, func(t *testing.T) {
			m := mustNew(t, p)
			rows := readTable(t, name+".csv")
			z := make([]float64, len(rows))
			for i, r := range rows {
				z[i] = number(t, r["z"])
			}
			var b Base
			m.Fill(&b, everything, z)
			worst := claim{scale: 1}
			worstErr, largest := 0.0, 0.0
			for i, r := range rows {
				largest = max(largest, math.Abs(b.DM[i]))
				for _, path := range []struct {
					name   string
					values Values
				}{{"Fill", valuesAt(&b, i)}, {"Direct", m.Direct(z[i])}} {
					for _, c := range claims(t, m, path.values, r, largest) {
						err := math.Abs(c.got-c.want) / c.scale
						if !(err <= aim) {
							t.Errorf("%s at z = %s: %s = %.17g, want %.17g (error %.2g)", path.name, r["z"], c.column, c.got, c.want, err)
						}
						if err > worstErr && path.name == "Fill" {
							worst, worstErr = c, err
							worst.column += " at z = " + r["z"]
						}
					}
				}
			}
			t.Logf("largest error of Fill: %.2g in %s", worstErr, worst.column)
		})
	}
}

func TestReferenceDensities(t *testing.T) {
	params := referenceParams(t)
	for _, r := range readTable(t, "models.csv") {
		m := mustNew(t, params[r["model"]])
		for _, c := range []claim{
			{"Ode", m.OmegaDE(), number(t, r["Ode"]), 1},
			{"Ok", m.OmegaK(), number(t, r["Ok"]), 1},
			{"Ogamma", m.OmegaPhoton(), number(t, r["Ogamma"]), number(t, r["Ogamma"])},
			{"Onu", m.OmegaNu(), number(t, r["Onu"]), number(t, r["Onu"])},
		} {
			if !(math.Abs(c.got-c.want) <= 1e-14*c.scale) {
				t.Errorf("%s: %s = %.17g, want %.17g", r["model"], c.column, c.got, c.want)
			}
		}
	}
}

func TestReferenceScalars(t *testing.T) {
	params := referenceParams(t)
	for _, r := range readTable(t, "scalars.csv") {
		m := mustNew(t, params[r["model"]])
		finite := func(v float64) float64 { // the tables say "none" for infinite horizons
			if math.IsInf(v, 0) {
				return math.NaN()
			}
			return v
		}
		for _, c := range []struct {
			column string
			got    float64
		}{
			{"age_now_gyr", m.Age()},
			{"hubble_distance_mpc", m.HubbleDistance()},
			{"hubble_time_gyr", m.HubbleTime()},
			{"particle_horizon_mpc", m.ParticleHorizon()},
			{"event_horizon_mpc", finite(m.EventHorizon())},
			{"z_vrec_now_c", m.HubbleSphereRedshift()},
			{"z_vrec_em_c", m.RecessionAtEmissionRedshift()},
			{"z_event_horizon", m.EventHorizonRedshift()},
		} {
			want := number(t, r[c.column])
			if !(math.Abs(c.got-want) <= 1e-12*math.Abs(want)) && (c.got == c.got || want == want) {
				t.Errorf("%s: %s = %.17g, want %.17g", r["model"], c.column, c.got, want)
			}
		}
	}
}

// The fitting formula of Komatsu et al. 2011 (ApJS 192, 18, eq. 26) is wrong by
// the amounts of the table; ours must show just those.
func TestNeutrinoFitError(t *testing.T) {
	base, _ := FindPreset("planck2018")
	for _, r := range readTable(t, "nu_fit_error.csv") {
		p := base.Params
		p.NeutrinoMasses = nil
		for _, s := range strings.Split(r["m_nu_eV"], ";") {
			p.NeutrinoMasses = append(p.NeutrinoMasses, number(t, s))
		}
		m := mustNew(t, p)
		x := 1 + number(t, r["z"])
		var exactly, fitted float64
		for i := range m.e.massive {
			s := &m.e.massive[i]
			exactly += s.density(x)
			const a, power = 0.3173, 1.83
			fitted += s.omega * math.Pow(x, 4) * math.Pow(1+math.Pow(a*s.y/x, power), 1/power)
		}
		if got, want := fitted/exactly-1, number(t, r["rel_err_rho_nu_massive"]); !(math.Abs(got-want) <= 1e-14) {
			t.Errorf("masses %s, z = %s: the fit is wrong by %.12g, want %.12g", r["m_nu_eV"], r["z"], got, want)
		}
	}
}

var _ = fmt.Sprint
