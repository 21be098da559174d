package demo

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// truthNames are the columns of the truth.
var truthNames = strings.Split("object_id,field,kind,template,defect,z_cos,z_cmb,z_hel,v_pec,distance_modulus,evolution,ebv_true,"+
	"abs_mag_g,k_g,extinction_g,corrected_g,abs_mag_r,k_r,extinction_r,corrected_r,abs_mag_i,k_i,extinction_i,corrected_i", ",")

// truthHeader says what the survey is made of, in comment lines, and names the
// columns.
func (s *survey) truthHeader(o Options) []byte {
	c := count(s.slots)
	var b strings.Builder
	say := func(format string, args ...any) { fmt.Fprintf(&b, "# "+format+"\n", args...) }
	say("The truth of Quill Ridge. The survey is invented: no object in it exists.")
	say("seed %d, %d objects; cosmology planck2018", o.Seed, o.Rows)
	say("main: %d galaxies in %.6g deg2, complete to r = %.4g without dust and noise, %.3g < z_cos < %.3g", c.main, mainField.area(), FluxLimit, nearLow, nearHigh)
	say("  Schechter function in r: M* = %.5g, alpha = %.4g, phi* = %.6g per Mpc3", schechterM, schechterAlpha, s.phiStar())
	say("  (all templates together), for absolute magnitudes %.4g to %.4g", brightest, faintest)
	say("deep: %d galaxies in %.6g deg2", c.deep, deepField.area())
	say("besides: %d quasars and %d candidates in deep, %d stars and %d blueshifted galaxies in main",
		c.kinds[quasar], c.kinds[candidate], c.kinds[star], c.kinds[blueshifted])
	say("e = -Q (z_cos - z0) in every band, Q = %.3g, z0 = %.3g; A/E(B-V) = %.4g, %.4g, %.4g in g, r, i", evolutionQ, evolutionZero, extinctionPerEBV[bandG], extinctionPerEBV[bandR], extinctionPerEBV[bandI])
	say("peculiar velocities: Gaussian, %d km/s", velocityDispersion)
	say("corrected magnitudes are M + mu + K + e: without dust and noise")
	say("defects, by name, number of rows and what is wrong; a row has one at most:")
	for i, d := range defects {
		if d.name != "" {
			say("  %s: %d: %s", d.name, c.defects[i], d.about)
		}
	}
	b.WriteString(strings.Join(truthNames, ",") + "\n")
	return []byte(b.String())
}

// phiStar is the density of the luminosity function that gives "main" as many
// galaxies as it has, per Mpc^3.
func (s *survey) phiStar() float64 {
	c := count(s.slots)
	return float64(c.main) / s.sampler.density()
}

// appendTo writes the object as a line of the truth, numbers to ten digits.
func (t *truth) appendTo(b []byte) []byte {
	name := "star"
	if t.template != starSED {
		name = templates[t.template].name
	}
	for i, s := range []string{t.id, t.field.name, kindNames[t.kind], name, defects[t.defect].name} {
		if i > 0 {
			b = append(b, ',')
		}
		b = append(b, s...)
	}
	for _, v := range []float64{t.zcos, t.zcmb, t.zhel, t.velocity, t.modulus, t.evolution, t.ebv} {
		b = appendDigits(b, v)
	}
	for i := range bands {
		for _, v := range []float64{t.absolute[i], t.k[i], t.extinction[i], t.corrected[i]} {
			b = appendDigits(b, v)
		}
	}
	return append(b, '\n')
}

// appendDigits writes a comma and v; NaN leaves the field empty.
func appendDigits(b []byte, v float64) []byte {
	b = append(b, ',')
	if math.IsNaN(v) {
		return b
	}
	return strconv.AppendFloat(b, v, 'g', 10, 64)
}
