package main

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"catenrich/pipeline/prove"
)

// termOf finds a term of an account.
func termOf(t *testing.T, a *prove.Account, section, name string) float64 {
	t.Helper()
	for _, s := range a.Sections {
		for _, term := range s.Terms {
			if s.Title == section && term.Name == name {
				if term.Value == nil {
					return math.NaN()
				}
				return *term.Value
			}
		}
	}
	t.Fatalf("no term %q in section %q", name, section)
	return 0
}

// TestExplainTerms compares terms with numbers that were worked out outside.
func TestExplainTerms(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "name,z,mag,ebv\nQR-1,0.5,18.2,0.05\nQR-2,3,21.5,0.1\nQR-3,,20,\n")
	mustRun(t, "run", "in.csv", "--redshift", "z", "--h0", "70", "--omega-m", "1", "--band", "r", "--magnitude", "mag", "--ebv", "ebv",
		"--extinction", "2.285", "--k-power-law", "-0.5", "--add", "distances,lookback_time,age_at_emission,absolute_magnitude_r", "-o", "out.csv", "--quiet")
	explain := func(args ...string) *prove.Account {
		t.Helper()
		a := new(prove.Account)
		if err := json.Unmarshal([]byte(mustRun(t, append([]string{"explain", "out.csv", "--json"}, args...)...).stdout), a); err != nil {
			t.Fatal(err)
		}
		return a
	}
	a := explain("--where", "name=QR-2")
	if a.Row != 2 || !a.Whole || a.Status != 0 || len(a.Columns) == 0 {
		t.Errorf("row %d, whole %v, status %d, %d columns", a.Row, a.Whole, a.Status, len(a.Columns))
	}
	// Einstein-de Sitter: D_C = 2 (c/H0)(1 - (1+z)^-1/2), t = (2/3)(1+z)^-3/2/H0 (Hogg 1999, eqs. 15 and 30, done by hand).
	const distance = 4282.7494 // Mpc
	for _, c := range []struct {
		section, name   string
		want, tolerance float64
		formula         string
	}{
		{"redshift", "z_cos", 3, 0, "as given"},
		{"cosmology", "D_H", 4282.7494, 5e-5, "299792.458/70"},
		{"cosmology", "E", 8, 1e-12, "(1+z)^3/2"},
		{"cosmology", "D_C", distance, 5e-5, "2 D_H (1 - 1/2)"},
		{"cosmology", "D_A", distance / 4, 5e-5, "D_M/(1+z)"},
		{"cosmology", "D_L", distance * 4, 2e-4, "D_M (1+z)"},
		{"cosmology", "mu", 25 + 5*math.Log10(4*distance), 1e-7, "5 log10(D_L/10 pc)"},
		{"cosmology", "t", 1.1640, 5e-5, "(2/3) 13.9684 Gyr / 8"},
		{"cosmology", "v_then", 2 * 299792.458, 1e-6, "c E D_C/(D_H (1+z)) = c 8/4"},
		{"band r", "A", 0.2285, 1e-12, "2.285 x 0.1"},
		{"band r", "K", -1.25 * math.Log10(4), 1e-12, "-2.5 (1 - 0.5) log10 4"},
		{"band r", "M", 21.5 - 0.2285 - (25 + 5*math.Log10(4*distance)) + 1.25*math.Log10(4), 1e-7, "m - A - mu - K"},
	} {
		if got := termOf(t, a, c.section, c.name); !(math.Abs(got-c.want) <= c.tolerance) {
			t.Errorf("%s, %s = %v, want %v (%s)", c.section, c.name, got, c.want, c.formula)
		}
	}
	if a = explain("--where", "z=0.50"); a.Row != 1 {
		t.Errorf("z = 0.50 is in row %d, want 1: the same number", a.Row)
	}
	a = explain("--row", "3")
	if a.Status&1 == 0 || !strings.Contains(strings.Join(a.Reasons, "\n"), "1: redshift missing") || !math.IsNaN(termOf(t, a, "redshift", "z_cos")) {
		t.Errorf("status %d: %q", a.Status, a.Reasons)
	}
	text := mustRun(t, "explain", "out.csv", "--row", "2").stdout
	for _, want := range []string{"out.csv, row 2", "D_L", "m - A - mu - K - e = 21.5 - 0.2285 - ", "nothing is wrong with this row"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not in\n%s", want, text)
		}
	}
}

// TestExplainRefuses says what is wrong.
func TestExplainRefuses(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "id,z\n1,0.5\n2,3\n")
	mustRun(t, "run", "in.csv", "--redshift", "z", "--set", "seventy-thirty", "--add", "times", "-o", "out.csv", "--quiet")
	for _, c := range []struct {
		args []string
		code int
		says string
	}{
		{[]string{"out.csv"}, 64, "one of --row and --where"},
		{[]string{"out.csv", "--row", "0"}, 64, "want 1 or more"},
		{[]string{"out.csv", "--row", "3"}, 65, "2 rows"},
		{[]string{"out.csv", "--where", "id"}, 64, "COLUMN=VALUE"},
		{[]string{"out.csv", "--where", "id=7"}, 65, "no row has id = 7"},
		{[]string{"out.csv", "--where", "name=7"}, 65, `no column "name"`},
		{[]string{"in.csv", "--row", "1"}, 65, "there is none"},
	} {
		if r := runHere(t, append([]string{"explain"}, c.args...), nil); r.code != c.code || !strings.Contains(r.stderr, c.says) {
			t.Errorf("explain %v: exit %d, want %d and %q\n%s", c.args, r.code, c.code, c.says, r.stderr)
		}
	}
	text := strings.Replace(string(readFile(t, "out.csv")), "2,3,", "2,3,1", 1)
	writeFile(t, "out.csv", text)
	resign(t, "out.csv")
	if r := runHere(t, []string{"explain", "out.csv", "--row", "2"}, nil); r.code != 65 || !strings.Contains(r.stdout, "DIFFERS") {
		t.Errorf("a changed value: exit %d\n%s%s", r.code, r.stdout, r.stderr)
	}
}
