package prove

import (
	"fmt"
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// A narrator tells the terms of one row.
type narrator struct {
	bound *columns.Bound
	job   *job.Job
	given []table.Column // what the catalogue holds, one for each of the kernel's needs
	trace columns.Trace

	models []*cosmo.Quadrature // the job's
}

// sections tells the redshift, then each cosmology, then each band.
func (n *narrator) sections() []Section {
	for _, m := range n.job.Models {
		n.models = append(n.models, m.Quadrature())
	}
	list := []Section{{"catalogue", n.catalogue()}, {"redshift", n.redshift()}}
	for i := range n.job.Models {
		list = append(list, n.cosmology(i))
	}
	for i := range n.job.Bands {
		if n.trace.Bands[i].Apparent == n.trace.Bands[i].Apparent {
			list = append(list, n.band(i))
		}
	}
	for i := range n.job.Selections {
		list = append(list, n.selection(i))
	}
	return list
}

// catalogue lists the cells that the row's columns were computed from.
func (n *narrator) catalogue() (terms []Term) {
	for i, need := range n.bound.Needs() {
		c := &n.given[i]
		term := Term{Name: string(need.Role), How: "column " + need.Column}
		if c.State[0] != table.Good || c.Kind == table.Bytes {
			term.Text = shown(c, 0)
		} else {
			term.Value = known(c.Float[0])
		}
		terms = append(terms, term)
	}
	return terms
}

// redshift tells how the catalogue's redshift became that of the expansion.
func (n *narrator) redshift() []Term {
	t, s := &n.trace, &n.job.Settings.Redshift
	how := "as the catalogue gives it, " + s.Frame
	if s.Convention != "" {
		how = fmt.Sprintf("from the velocity, %s convention, %s", s.Convention, s.Frame)
	}
	if len(s.Valid) == 2 {
		how += fmt.Sprintf("; believed from %g to %g", s.Valid[0], s.Valid[1])
	}
	terms := []Term{{Name: "z", Value: known(t.ZIn), How: how}}
	if t.SigmaZ == t.SigmaZ {
		terms = append(terms, Term{Name: "sigma_z", Value: known(t.SigmaZ), How: "its standard error"})
	}
	if s.PeculiarVelocitySigma > 0 {
		terms = append(terms, Term{Name: "sigma_v", Value: known(s.PeculiarVelocitySigma), Unit: "km/s", How: "scatter of peculiar velocities, for errors"})
	}
	for _, to := range []struct {
		name   string
		motion *frame.Motion
	}{{"cmb", frame.SunInCMB}, {"local-group", frame.SunInLocalGroup}} {
		if t.X == t.X && (s.Frame == to.name || s.DistancesIn == to.name) {
			sun := make([]float64, 1)
			to.motion.SunRedshift(sun, &frame.Vectors{X: []float64{t.X}, Y: []float64{t.Y}, Z: []float64{t.Z}})
			terms = append(terms, Term{Name: "z_sun", Value: known(sun[0]), How: "the Sun's own motion in the " + to.name + " frame, seen toward the object: gamma (1 - beta.n) - 1"})
		}
	}
	terms = append(terms,
		Term{Name: "z_obs", Value: known(t.ZObs), How: "as measured at the Sun; K-corrections and dimming use it"},
		Term{Name: "z_frame", Value: known(t.ZFrame), How: "in the frame of the distances: " + n.frameHow()})
	how = "of the expansion alone: z_frame"
	if _, ok := n.job.Settings.Catalogue[job.RolePeculiarVelocity]; ok {
		how = "of the expansion alone: (1 + z_frame)/(1 + v_p/c) - 1"
	}
	terms = append(terms, Term{Name: "z_cos", Value: known(t.ZCos), How: how})
	if t.ZModel != t.ZModel && t.ZCos == t.ZCos {
		terms = append(terms, Term{Name: "z_model", Value: nil, How: "none: columns of the model are null at this redshift"})
	}
	return terms
}

func (n *narrator) frameHow() string {
	s := &n.job.Settings.Redshift
	switch {
	case s.DistancesIn == "as-given" || s.DistancesIn == s.Frame:
		return s.Frame
	case n.trace.X != n.trace.X:
		return s.DistancesIn + ", which takes a position"
	}
	return s.DistancesIn + ", (z_obs - z_sun)/(1 + z_sun)"
}

// titleOf names a cosmology by the suffix of its columns.
func (n *narrator) titleOf(i int) string {
	title := "cosmology"
	if suffix := n.job.Settings.Cosmologies[i].Suffix; suffix != "" {
		title += " of the columns that end in " + suffix
	}
	if unit := n.job.Settings.LengthUnit; unit != "Mpc" {
		title += ", in Mpc where the columns are in " + unit
	}
	return title
}

// cosmology tells a model in numbers, and what it makes of z_cos, in Mpc
// whatever the length unit of the columns.
func (n *narrator) cosmology(i int) Section {
	m, t := n.models[i], &n.trace
	p := m.Params()
	s := Section{Title: n.titleOf(i)}
	add := func(name string, value float64, unit, how string) {
		s.Terms = append(s.Terms, Term{Name: name, Value: known(value), Unit: unit, How: how})
	}
	add("H0", p.H0, "km/s/Mpc", "Hubble constant")
	add("Omega_m", m.OmegaM(), "", "matter without neutrinos")
	add("Omega_k", m.OmegaK(), "", "curvature: 1 less all the rest")
	add("Omega_gamma", m.OmegaPhoton(), "", fmt.Sprintf("photons of %g K", p.TCMB))
	add("Omega_nu", m.OmegaNu(), "", fmt.Sprintf("neutrinos, N_eff %g, masses %v eV", p.Neff, p.NeutrinoMasses))
	add("Omega_de", m.OmegaDE(), "", fmt.Sprintf("dark energy, w0 %g, wa %g", p.W0, p.Wa))
	add("D_H", m.HubbleDistance(), "Mpc", "c/H0")
	add("t_H", m.HubbleTime(), "Gyr", "1/H0")
	add("D_EH", m.EventHorizon(), "Mpc", "event horizon today, D_H times the integral of dz/E from -1 to 0")
	z := t.ZModel
	if z != z {
		return s
	}
	length, lag := m.HubbleDistance(), m.HubbleTime()
	dc, dm, e := length*m.At(cosmo.DC, z), length*m.At(cosmo.DM, z), m.At(cosmo.E, z)
	da := dm * (1 + t.ZFrame) / ((1 + z) * (1 + t.ZObs))
	dl := (1 + t.ZObs) * (1 + t.ZObs) * da
	add("E", e, "", "H(z_cos)/H0")
	add("D_C", dc, "Mpc", "D_H times the integral of dz/E from 0 to z_cos")
	add("D_M", dm, "Mpc", curvatureHow(m.OmegaK()))
	add("D_A", da, "Mpc", "D_M (1 + z_frame)/[(1 + z_cos)(1 + z_obs)]")
	add("D_L", dl, "Mpc", "(1 + z_obs)^2 D_A")
	add("mu", 25+5*math.Log10(dl), "mag", "5 log10(D_L/10 pc)")
	add("V_C", length*length*length*m.At(cosmo.Volume, z), "Mpc3", "the whole sky within z_cos")
	add("t_L", lag*m.At(cosmo.Lookback, z), "Gyr", "t_H times the integral of dz/[(1 + z) E] from 0 to z_cos")
	add("t", lag*m.At(cosmo.Age, z), "Gyr", "the same from z_cos to the big bang")
	add("v_now", cosmo.SpeedOfLight*dc/length, "km/s", "H0 D_C")
	add("v_then", cosmo.SpeedOfLight*e/(1+z)*dc/length, "km/s", "H(z_cos) D_C/(1 + z_cos)")
	return s
}

// curvatureHow is the formula of D_M.
func curvatureHow(k float64) string {
	switch {
	case k > 0:
		return "D_H sinh(sqrt(Omega_k) D_C/D_H)/sqrt(Omega_k)"
	case k < 0:
		return "D_H |sin(sqrt(-Omega_k) D_C/D_H)|/sqrt(-Omega_k)"
	}
	return "D_C: space is flat"
}

// band tells M = m - A - mu - K - e, for each cosmology.
func (n *narrator) band(i int) Section {
	b, t := &n.job.Bands[i], &n.trace.Bands[i]
	from := func(part string) string { return n.job.Settings.Catalogue[job.BandRole(b.Name, part)] }
	how := map[string]string{
		"magnitude": "column %s", "flux": "zero point less 2.5 log10 of column %s", "asinh": "column %s, an asinh magnitude, turned to flux and back",
	}[b.Measure]
	if b.Offset != 0 {
		how += fmt.Sprintf(", plus the offset %g", b.Offset)
	}
	s := Section{Title: "band " + b.Name}
	add := func(name string, value float64, how string) {
		s.Terms = append(s.Terms, Term{Name: name, Value: known(value), Unit: "mag", How: how})
	}
	add("m", t.Apparent, fmt.Sprintf(how, from(job.PartValue)))
	if t.Extinction == t.Extinction {
		add("A", t.Extinction, map[string]string{
			"": "no extinction is taken out", "column": "column " + from(job.PartExtinction),
			"coefficient": fmt.Sprintf("%g times E(B-V), column %s", b.PerEBV, n.job.Settings.Catalogue[job.RoleEBV]),
		}[b.Extinction])
	}
	if t.K == t.K || b.K.Lost() {
		add("K", t.K, kHow(b, from(job.PartK), from(job.PartTemplate)))
	}
	if t.Evolution == t.Evolution {
		add("e", t.Evolution+0, evolutionHow(b))
	}
	for k := range n.job.Models {
		n.absolute(&s, i, k)
	}
	return s
}

func evolutionHow(b *job.BandPlan) string {
	if b.Q == 0 {
		return "no evolution"
	}
	return fmt.Sprintf("-Q (z_cos - z0), Q %g, z0 %g", b.Q, b.Z0)
}

// absolute adds M in one cosmology.
func (n *narrator) absolute(s *Section, band, model int) {
	t, z := &n.trace.Bands[band], n.trace.ZModel
	m := n.models[model]
	dl := m.HubbleDistance() * m.At(cosmo.DM, z) * (1 + n.trace.ZFrame) * (1 + n.trace.ZObs) / (1 + z)
	mu := 25 + 5*math.Log10(dl)
	value := t.Apparent - t.Extinction - mu - t.K - t.Evolution
	if value != value {
		return
	}
	name := "M" + n.job.Settings.Cosmologies[model].Suffix
	sum := fmt.Sprintf("%.6g", t.Apparent)
	for _, term := range []float64{t.Extinction, mu, t.K, t.Evolution + 0} { // -0 becomes 0
		sum += fmt.Sprintf(map[bool]string{false: " - %.6g", true: " - (%.6g)"}[term < 0], term)
	}
	s.Terms = append(s.Terms, Term{Name: name, Value: known(value), Unit: "mag", How: "m - A - mu - K - e = " + sum})
}

func kHow(b *job.BandPlan, column, template string) string {
	switch k := &b.BandSettings.K; k.Kind {
	case "column":
		return "column " + column
	case "power_law":
		return fmt.Sprintf("of f_nu ~ nu^%g at z_obs, to the band shifted to %g", k.Alpha, k.RestRedshift)
	case "table":
		if template != "" {
			return "table at z_obs, template by column " + template
		}
		return "table at z_obs"
	case "sed":
		return "synthetic, an SED through a bandpass, at z_obs"
	}
	return "none: the magnitude stays in the band as observed"
}

// selection tells the limits of a selection.
func (n *narrator) selection(i int) Section {
	p := &n.job.Selections[i]
	s := Section{Title: "selection " + p.Name}
	add := func(name string, value float64, unit, how string) {
		s.Terms = append(s.Terms, Term{Name: name, Value: known(value), Unit: unit, How: how})
	}
	add("z_low", p.Redshift[0], "", "lowest z_cos")
	add("z_high", p.Redshift[1], "", "highest z_cos")
	for k, l := range p.Limits {
		band := n.job.Bands[l.Band].Name
		t, of := &n.trace.Bands[l.Band], "m"
		value := t.Apparent
		if p.Corrected {
			of, value = "m - A", t.Apparent-t.Extinction
		}
		add(of+" of "+band, value, "mag", "what the limits are on")
		for _, limit := range []struct {
			name  string
			value *float64
			part  string
		}{{"bright", p.SelectionSettings.Limits[k].Bright, job.PartBright}, {"faint", p.SelectionSettings.Limits[k].Faint, job.PartFaint}} {
			if limit.value != nil {
				add(limit.name, *limit.value, "mag", "limit of the job")
			} else if column := n.job.Settings.Catalogue[job.LimitRole(p.Name, band, limit.part)]; column != "" {
				s.Terms = append(s.Terms, Term{Name: limit.name, Value: n.cell(job.LimitRole(p.Name, band, limit.part)), Unit: "mag", How: "column " + column})
			}
		}
	}
	if p.Area > 0 {
		add("area", p.Area, "deg2", "of the survey")
	}
	return s
}

// cell is the number in the column of a role.
func (n *narrator) cell(role job.Role) *float64 {
	for i, need := range n.bound.Needs() {
		if need.Role == role && n.given[i].Kind == table.Float {
			return known(n.given[i].Float[0])
		}
	}
	return nil
}
