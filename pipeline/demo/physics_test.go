package demo

import (
	"math"
	"regexp"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
)

// TestErrors holds that each quoted error is the width of the noise.
func TestErrors(t *testing.T) {
	s := survey20k(t)
	for _, field := range []string{"main", "deep"} {
		pulls := make(map[string][]float64)
		for _, r := range s.rows {
			if !r.good(field) {
				continue
			}
			add := func(name string, p float64) { pulls[name] = append(pulls[name], p) }
			add("z_best", (r.number("z_best")-r.fact("z_hel"))/r.number("z_err"))
			add("ebv", (r.number("ebv")-r.fact("ebv_true"))/r.number("ebv_err"))
			for _, b := range []string{"g", "r"} {
				add("mag_"+b, (r.number("mag_"+b)-r.fact("corrected_"+b)-r.fact("extinction_"+b))/r.number("magerr_"+b))
			}
			flux := math.Pow(10, 0.4*(22.5-r.fact("corrected_i")-r.fact("extinction_i")))
			add("flux_i", (r.number("flux_i")-flux)*math.Sqrt(r.number("ivar_i")))
		}
		for name, p := range pulls {
			checkPulls(t, field+" "+name, p)
		}
	}
}

// TestPeculiarVelocities holds their distribution.
func TestPeculiarVelocities(t *testing.T) {
	var pulls []float64
	for _, r := range survey20k(t).rows {
		if v := r.fact("v_pec"); v == v {
			pulls = append(pulls, v/250)
		}
	}
	checkPulls(t, "v_pec", pulls)
}

// TestPopulation compares redshifts and luminosities of "main" with the volume
// element times the luminosity function, integrated by gonum.
func TestPopulation(t *testing.T) {
	var z, m []float64
	for _, r := range survey20k(t).rows {
		if r.seen["field"] == "main" && r.true["kind"] == "galaxy" {
			z, m = append(z, r.fact("z_cos")), append(m, r.fact("abs_mag_r"))
		}
	}
	total := checkPopulation(t, z, m)
	// 28.1227 deg2 of 4 pi: the count fixes phi*, which the truth states.
	volume := 28.1227 * sq(math.Pi/180) / 3 * total
	if got, want := survey20k(t).phiStar(t), float64(len(z))/volume; math.Abs(got/want-1) > 2e-3 { // 7 broken records, steps of 0.03 mag
		t.Errorf("phi* in the truth = %g, want %g", got, want)
	}
}

// checkPopulation tests the distributions of z_cos and of M in r, and returns
// how many galaxies there would be with phi* = 1, times 3, per steradian.
func checkPopulation(t *testing.T, z, m []float64) float64 {
	t.Helper()
	bright := func(z float64) float64 { // galaxies per volume above the limit
		sum := 0.0
		for template, share := range shares {
			faint := min(19.8-offset(z, z, template), -13.5)
			if faint > -24.5 {
				sum += share * quad.Fixed(outsideSchechter, -24.5, faint, 60, nil, 0)
			}
		}
		return sum
	}
	ofZ, _ := cumulative(func(z float64) float64 {
		d := outsideDistance(z)
		return d * d / outsideE(z) * bright(z)
	}, 0.005, 0.6, 300)
	ofM, total := cumulative(func(m float64) float64 {
		v := 0.0
		for template, share := range shares {
			far, near := outsideDistance(farthest(m, 19.8, 0.6, 1, template)), outsideDistance(0.005)
			v += share * max(0, far*far*far-near*near*near)
		}
		return v * outsideSchechter(m)
	}, -24.5, -13.5, 220)
	for _, c := range []struct {
		name string
		x    []float64
		cdf  func(float64) float64
	}{{"z_cos", z, ofZ}, {"abs_mag_r", m, ofM}} {
		ks := kolmogorov(c.x, c.cdf)
		t.Logf("%s: KS %.2f of %d", c.name, ks, len(c.x))
		if !(ks < 1.63) {
			t.Errorf("%s of main: KS %.2f against the luminosity function, want below 1.63", c.name, ks)
		}
	}
	return total
}

func (s *defaultSurvey) phiStar(t *testing.T) float64 {
	t.Helper()
	found := regexp.MustCompile(`phi\* = ([0-9.e-]+) per`).FindStringSubmatch(s.header)
	if found == nil {
		t.Fatalf("no phi* in the truth's header:\n%s", s.header)
	}
	v, err := strconv.ParseFloat(found[1], 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// A measured galaxy is what an astronomer makes of a row without its truth.
type measured struct {
	zcmb, m    float64 // M in r
	sigma      float64
	seen       float64 // corrected magnitude
	ratio      float64 // (1+z_obs)/(1+z_cos)
	template   string
	complete   float64
	trueM, far float64
}

// measure reduces a row: to the frame of the microwave background by the
// published apex, then to an absolute magnitude with its error.
func measure(r row) measured {
	// Toward (167.942, -6.944) deg, 369.82 km/s: Planck 2018 results I (from memory).
	const speed = 369.82 / 299792.458
	ra, dec := r.number("ra")*math.Pi/180, r.number("dec")*math.Pi/180
	const apexRA, apexDec = 167.942 * math.Pi / 180, -6.944 * math.Pi / 180
	cos := math.Sin(dec)*math.Sin(apexDec) + math.Cos(dec)*math.Cos(apexDec)*math.Cos(ra-apexRA)
	zobs := r.number("z_best")
	g := measured{template: r.seen["template"], complete: r.number("completeness"), trueM: r.fact("abs_mag_r")}
	g.zcmb = (1+zobs)*math.Sqrt(1-speed*speed)/(1-speed*speed)/(1/(1-speed*speed)*(1-speed*cos)) - 1
	g.ratio = (1 + zobs) / (1 + g.zcmb)
	g.seen = r.number("mag_r") - 2.285*r.number("ebv")
	g.m = g.seen - offset(g.zcmb, zobs, g.template)
	const step = 1e-4
	slope := (offset(g.zcmb+step, zobs+step, g.template) - offset(g.zcmb-step, zobs-step, g.template)) / (2 * step)
	// A peculiar velocity moves z_cos alone, in D_L = D_M(z_cos) (1+z_obs)(1+z_frame)/(1+z_cos).
	drift := (offset(g.zcmb+step, zobs, g.template)-offset(g.zcmb-step, zobs, g.template))/(2*step) - 5/math.Ln10/(1+g.zcmb)
	g.sigma = math.Sqrt(sq(r.number("magerr_r")) + sq(2.285*r.number("ebv_err")) +
		sq(slope*r.number("z_err")) + sq(drift*(1+g.zcmb)*250/299792.458))
	return g
}

func sq(x float64) float64 { return x * x }

// measuredMain reduces all good rows of "main".
func measuredMain(t *testing.T) []measured {
	var out []measured
	for _, r := range survey20k(t).rows {
		if r.good("main") && r.true["kind"] == "galaxy" {
			out = append(out, measure(r))
		}
	}
	return out
}

// TestAbsoluteMagnitudes recovers the true absolute magnitudes. Beyond
// z = 0.02 a peculiar velocity is small against the expansion, and the errors
// are linear.
func TestAbsoluteMagnitudes(t *testing.T) {
	var pulls []float64
	for _, g := range measuredMain(t) {
		if g.zcmb > 0.02 {
			pulls = append(pulls, (g.m-g.trueM)/g.sigma)
		}
	}
	checkPulls(t, "M_r", pulls)
}

// selection returns the galaxies between z = 0.01 and 0.5 brighter than limit,
// each with its V/Vmax, and the mean of this.
func selection(all []measured, limit float64) (chosen []measured, ratios []float64, mean float64) {
	near := outsideDistance(0.01)
	for _, g := range all {
		if g.seen >= limit || g.zcmb < 0.01 || g.zcmb > 0.5 {
			continue
		}
		g.far = outsideDistance(farthest(g.m, limit, 0.5, g.ratio, g.template))
		d := outsideDistance(g.zcmb)
		chosen = append(chosen, g)
		ratios = append(ratios, (d*d*d-near*near*near)/(g.far*g.far*g.far-near*near*near))
	}
	for _, v := range ratios {
		mean += v / float64(len(ratios))
	}
	return chosen, ratios, mean
}

// TestVolumes is the V/Vmax test of Schmidt (1968, ApJ 151, 393), by direct
// computation: a complete sample has a mean of 0.5 ± 1/sqrt(12 N). Beyond its
// limit the survey is not complete, and the same test must say so.
func TestVolumes(t *testing.T) {
	all := measuredMain(t)
	for _, limit := range []float64{18.5, 19.0, 19.5} {
		checkVolumes(t, all, limit)
	}
	_, ratios, mean := selection(all, 20.1)
	if error := 1 / math.Sqrt(12*float64(len(ratios))); mean > 0.5-3*error {
		t.Errorf("a limit of 20.1, where the survey is not complete, gives <V/Vmax> = %.4f: the test cannot fail", mean)
	}
}

// checkVolumes tests that V/Vmax is uniform, with a mean of 0.5.
func checkVolumes(t *testing.T, all []measured, limit float64) {
	t.Helper()
	_, ratios, mean := selection(all, limit)
	error := 1 / math.Sqrt(12*float64(len(ratios)))
	ks := kolmogorov(ratios, func(x float64) float64 { return min(max(x, 0), 1) })
	t.Logf("r < %.1f: <V/Vmax> = %.4f ± %.4f of %d, KS %.2f", limit, mean, error, len(ratios), ks)
	if !(math.Abs(mean-0.5) < 3*error) || !(ks < 1.63) {
		t.Errorf("r < %.1f: <V/Vmax> = %.4f of %d with KS %.2f, want 0.5 ± %.4f and below 1.63", limit, mean, len(ratios), ks, 3*error)
	}
}

// TestLargeSample repeats the checks of the population on 100 000 galaxies of
// another seed: what is hidden by chance in the default survey would show.
func TestLargeSample(t *testing.T) {
	s, err := newSurvey(Options{Rows: 145000, Seed: DefaultSeed + 1})
	if err != nil {
		t.Fatal(err)
	}
	var tr truth
	var rec record
	var z, m, pulls []float64
	var all []measured
	for i := range s.slots {
		s.make(i, &tr, &rec)
		if tr.kind != galaxy || tr.deepField() {
			continue
		}
		z, m = append(z, tr.zcos), append(m, tr.absolute[bandR])
		if tr.defect != 0 || rec[colZFlag].number < flagGood {
			continue
		}
		r := row{make(map[string]string), map[string]string{"abs_mag_r": strconv.FormatFloat(tr.absolute[bandR], 'g', -1, 64)}}
		for _, c := range []int{colRA, colDec, colZBest, colZErr, colEBV, colEBVErr, colMagR, colMagErrR, colCompleteness} {
			r.seen[columnNames[c]] = strconv.FormatFloat(rec[c].number, 'g', -1, 64)
		}
		r.seen["template"] = rec[colTemplate].text
		g := measure(r)
		all = append(all, g)
		if g.zcmb > 0.02 {
			pulls = append(pulls, (g.m-g.trueM)/g.sigma)
		}
	}
	checkPopulation(t, z, m)
	checkPulls(t, "M_r", pulls)
	checkVolumes(t, all, 19.5)
}

// TestLuminosityFunction recovers the Schechter function by weights 1/(C Vmax)
// (Schmidt 1968; Felten 1976, ApJ 207, 700).
func TestLuminosityFunction(t *testing.T) {
	s := survey20k(t)
	usable := 0.0 // share of the galaxies whose row has no defect
	n := 0.0
	for _, r := range s.rows {
		if r.seen["field"] == "main" && r.true["kind"] == "galaxy" {
			if n++; r.true["defect"] == "" {
				usable++
			}
		}
	}
	usable /= n
	chosen, _, _ := selection(measuredMain(t), 19.5)
	near := outsideDistance(0.01)
	const low, width = -23.0, 0.5
	var sum, square [12]float64
	for _, g := range chosen {
		bin := int(math.Floor((g.m - low) / width))
		if bin < 0 || bin >= len(sum) {
			continue
		}
		v := 28.1227 * sq(math.Pi/180) / 3 * (g.far*g.far*g.far - near*near*near)
		w := 1 / (g.complete * usable * v)
		sum[bin] += w
		square[bin] += w * w
	}
	chi2 := 0.0
	for i := range sum {
		m := low + width*float64(i)
		want := s.phiStar(t) * quad.Fixed(outsideSchechter, m, m+width, 20, nil, 0)
		d := (sum[i] - want) / math.Sqrt(square[i])
		t.Logf("M = %.2f: %.3g ± %.2g per Mpc3, truth %.3g (%+.1f sigma)", m+width/2, sum[i], math.Sqrt(square[i]), want, d)
		chi2 += d * d
	}
	// 12 bins: 32.9 is exceeded once in a thousand times (chi-squared table).
	if chi2 > 32.9 {
		t.Errorf("chi2 = %.1f of 12 bins, want below 32.9", chi2)
	}
}

// TestModuli compares the truth's distance moduli with gonum's quadrature and
// M + mu + K + e with the magnitudes, row by row.
func TestModuli(t *testing.T) {
	worst := 0.0
	for _, r := range survey20k(t).rows {
		z := r.fact("z_cos")
		if !(z > 0) || z > 0.6 {
			continue
		}
		// D_L = D_M (1+z_obs)(1+z_frame)/(1+z_cos) (Davis et al. 2011).
		want := outsideModulus(z, r.fact("z_hel")) + 5*math.Log10((1+r.fact("z_cmb"))/(1+z))
		worst = max(worst, math.Abs(r.fact("distance_modulus")-want))
		for _, b := range []string{"g", "r", "i"} {
			sum := r.fact("abs_mag_"+b) + r.fact("distance_modulus") + r.fact("k_"+b) + r.fact("evolution")
			if math.Abs(sum-r.fact("corrected_"+b)) > 1e-7 {
				t.Fatalf("%s: corrected_%s = %s, the terms give %.8f", r.seen["object_id"], b, r.true["corrected_"+b], sum)
			}
		}
	}
	if worst > 1e-4 {
		t.Errorf("distance moduli differ from quadrature by up to %g mag, want below 1e-4", worst)
	}
}
