package report

import (
	"fmt"
	"html/template"
	"math"
	"strings"

	"catenrich/cosmo"
	"catenrich/internal/exact"
	"catenrich/pipeline/ledger"
)

// strokes tell the models apart by their dashes, not by colour alone.
var strokes = []string{"line one", "line two", "line three", "line four"}

func stroke(model int) string { return strokes[min(model, len(strokes)-1)] }

// modelName is what a chart calls a cosmology.
func (r *Release) modelName(i int) string {
	name := r.presetName(i)
	if name == "" {
		p := r.models[i].Params()
		name = fmt.Sprintf("H₀ %s, Ωm %s", plain(p.H0), plain(p.OmegaM))
	}
	if suffix := r.Settings.Cosmologies[i].Suffix; suffix != "" {
		name += " (" + suffix + ")"
	}
	return name
}

// presetName is the named set that has the parameters of a cosmology, or "".
func (r *Release) presetName(i int) string {
	p := r.models[i].Params()
	for _, set := range cosmo.Presets() {
		q := set.Params
		if p.H0 == q.H0 && p.OmegaM == q.OmegaM && p.Flat == q.Flat && (p.Flat || p.OmegaDE == q.OmegaDE) && p.W0 == q.W0 && p.Wa == q.Wa &&
			p.TCMB == q.TCMB && p.Neff == q.Neff && sameMasses(p.NeutrinoMasses, q.NeutrinoMasses) {
			return set.Name
		}
	}
	return ""
}

// sameMasses compares neutrino masses; none stands for three without mass.
func sameMasses(a, b []float64) bool {
	at := func(list []float64, i int) float64 {
		if i < len(list) {
			return list[i]
		}
		return 0
	}
	for i := range max(len(a), len(b), 3) {
		if at(a, i) != at(b, i) {
			return false
		}
	}
	return len(a) == len(b) || len(a)%3 == 0 && len(b)%3 == 0
}

// redshiftChart is n(z), with the lookback time above and the previous
// release's n(z) behind.
func redshiftChart(r, before *Release, a *zAxis) *chart {
	c := newChart("nz", "n(z): rows by redshift")
	c.y.to = 46
	a.put(c)
	edges, now := bars(r.octaves(), a)
	then := []float64(nil)
	if before != nil && before.octaves() != nil {
		_, then = bars(before.octaves(), a)
	}
	peak, mode := 1.0, 0
	for i, n := range now {
		if n > peak {
			peak, mode = n, i
		}
	}
	for _, n := range then {
		peak = max(peak, n)
	}
	c.y.high = peak * 1.05
	c.axes("cosmological redshift z", "rows in a bar", c.x.ticks(5), wholeTicks(&c.y))
	m := r.models[0]
	c.line(c.x.from, c.y.to, c.x.to, c.y.to, "axis")
	for _, t := range a.lookbackTicks(m, &c.x) {
		x := c.x.at(t.at)
		c.line(x, c.y.to, x, c.y.to-4, "axis")
		c.text(x, c.y.to-7, "middle", "tick", t.label)
	}
	c.text(c.x.to, 13, "end", "label", "lookback time, Gyr")
	c.steps("fill", edges, now, true)
	if then != nil {
		c.steps("before", edges, then, false)
	}
	n, _ := r.redshifts()
	c.Desc = fmt.Sprintf("%s have a redshift, half of them below about %s. The fullest bar is from z = %s to %s. The axis is from z = %s to %s.",
		plural(n, "row"), number(a.median, 2), number(edges[mode], 2), number(edges[mode+1], 2), number(a.low, 2), number(a.high, 2))
	note := fmt.Sprintf("Half of the rows are below z ≈ %s. Lookback times are of %s.", number(a.median, 2), r.modelName(0))
	if a.outside > 0 {
		note += fmt.Sprintf(" %s outside the axis: zero, negative, or far from the others.", plural(a.outside, "row"))
	}
	if then != nil {
		note += " Dashed: the previous release."
	}
	c.Note = escaped(note)
	return c
}

// wholeTicks are ticks of a scale of counts.
func wholeTicks(s *scale) []tick {
	var list []tick
	for _, t := range s.ticks(4) {
		if t.at == math.Trunc(t.at) {
			list = append(list, tick{t.at, compact(t.at)})
		}
	}
	return list
}

// compact is a count in few characters.
func compact(v float64) string {
	switch {
	case v >= 1e9:
		return strings.TrimSuffix(fixed(v/1e9, 1), ".0") + narrow + "G"
	case v >= 1e6:
		return strings.TrimSuffix(fixed(v/1e6, 1), ".0") + narrow + "M"
	case v >= 1e4:
		return strings.TrimSuffix(fixed(v/1e3, 1), ".0") + narrow + "k"
	}
	return fixed(v, 0)
}

// bars rebins a histogram of octaves to the bars of an axis.
func bars(h *ledger.Histogram, a *zAxis) (edges, heights []float64) {
	axis := h.Axes()[0]
	first := axis.First
	for axis.Edge(first) < a.low {
		first++
	}
	for k := first; ; k += a.bars {
		edges = append(edges, axis.Edge(min(k, axis.End)))
		if k >= axis.End || axis.Edge(k) >= a.high {
			break
		}
	}
	heights = make([]float64, len(edges)-1)
	for c := range h.Cells {
		if i := (c.Keys[0] - first) / a.bars; c.Keys[0] >= first && i < int64(len(heights)) {
			heights[i] += float64(c.Count)
		}
	}
	return edges, heights
}

// modulusChart is the distance modulus against redshift, for every model.
func modulusChart(r *Release, a *zAxis) *chart {
	c := newChart("mu", "Distance modulus against redshift")
	a.put(c)
	zs := a.samples()
	curves := make([][]float64, len(r.models))
	c.y.low, c.y.high = math.Inf(1), math.Inf(-1)
	for i, m := range r.models {
		curves[i] = moduli(m, zs)
		for _, mu := range curves[i] {
			if math.Abs(mu) < 1e6 { // not NaN, not at the antipode
				c.y.low, c.y.high = min(c.y.low, mu), max(c.y.high, mu)
			}
		}
	}
	c.y.low, c.y.high = math.Floor(c.y.low), math.Ceil(c.y.high)
	if !(c.y.high > c.y.low) {
		c.y.low, c.y.high = 0, 1
	}
	c.axes("cosmological redshift z", "distance modulus, mag", c.x.ticks(5), c.y.ticks(5))
	c.medianMark(a)
	for i := range curves {
		c.path(stroke(i), zs, curves[i])
	}
	at := moduli(r.models[0], []float64{a.median})[0]
	note := fmt.Sprintf("At the median redshift, z ≈ %s: %s mag (%s)", number(a.median, 2), fixed(at, 2), r.modelName(0))
	for i := 1; i < len(r.models); i++ {
		note += fmt.Sprintf(", %s mag with %s", signed(moduli(r.models[i], []float64{a.median})[0]-at, 3), r.modelName(i))
	}
	c.Note = escaped(note + ".")
	c.Desc = fmt.Sprintf("The modulus rises from %s mag at z = %s to %s mag at z = %s. %s.",
		fixed(curves[0][0], 1), number(a.low, 2), fixed(curves[0][len(zs)-1], 1), number(a.high, 2), note)
	return c
}

// medianMark marks the median redshift.
func (c *chart) medianMark(a *zAxis) {
	x := c.x.at(a.median)
	c.line(x, c.y.from, x, c.y.to, "median")
	anchor, dx := "start", 4.0
	if x > chartWidth*0.7 {
		anchor, dx = "end", -4
	}
	c.text(x+dx, c.y.from-6, anchor, "tick", "median row")
}

// moduli are distance moduli in mag with D_L in Mpc, where z is all there is.
func moduli(m *cosmo.Model, zs []float64) []float64 {
	out := make([]float64, len(zs))
	for i, z := range zs {
		d := m.At(cosmo.DM, z) * (1 + z) * m.HubbleDistance()
		out[i] = 25 + float64(5*exact.Log10(d))
	}
	return out
}

// velocityChart is the recession velocity against redshift, today and when the
// light left, with the lines that divide reach and speed.
func velocityChart(r *Release, a *zAxis) *chart {
	c := newChart("velocity", "Recession velocity against redshift")
	a.put(c)
	m := r.models[0]
	zs := a.samples()
	now, then := make([]float64, len(zs)), make([]float64, len(zs))
	horizon := m.EventHorizon() / m.HubbleDistance()
	c.y.high = 1.3
	if horizon < 3 {
		c.y.high = max(c.y.high, horizon*1.15)
	}
	for i, z := range zs {
		now[i] = m.At(cosmo.DC, z)
		then[i] = m.At(cosmo.E, z) / (1 + z) * now[i]
		if now[i] == now[i] {
			c.y.high = max(c.y.high, now[i]*1.08, min(then[i]*1.02, 4))
		}
	}
	c.axes("cosmological redshift z", "recession velocity, in units of c", c.x.ticks(5), c.y.ticks(5))
	c.line(c.x.from, c.y.at(1), c.x.to, c.y.at(1), "limit")
	label := "speed of light"
	if horizon <= c.y.high {
		y := c.y.at(horizon)
		c.line(c.x.from, y, c.x.to, y, "limit wide")
		c.text(c.x.from+4, y-5, "start", "tick", "event horizon")
	}
	c.text(c.x.from+4, c.y.at(1)+14, "start", "tick", label)
	c.path("line one", zs, now)
	c.path("line two", zs, then)
	light, horizonRows := r.surfaceRows(0, "superluminal_now", m.HubbleSphereRedshift()), r.surfaceRows(0, "beyond_event_horizon", m.EventHorizonRedshift())
	c.Note = escaped(fmt.Sprintf("Solid: today; dashed: when the light left. Rows that recede faster than light today: %s. Rows beyond the event horizon, where no signal sent today arrives: %s. Model: %s.",
		light, horizonRows, r.modelName(0)))
	c.Desc = fmt.Sprintf("At z = %s objects recede today at %s times the speed of light. Beyond the speed of light: %s of the rows; beyond the event horizon: %s.",
		number(a.high, 2), number(now[len(now)-1], 3), light, horizonRows)
	return c
}

// surfaceRows says how many rows are beyond a surface: as a column of flags has
// counted them, or by the histogram of redshifts.
func (r *Release) surfaceRows(model int, flag string, z float64) string {
	total, _ := r.redshifts()
	if column := r.column(flag, model); column != nil {
		return fmt.Sprintf("%s (%s)", count(column.True), share(column.True, total))
	}
	n, exactly := r.beyond(z)
	if exactly {
		return fmt.Sprintf("%s (%s)", count(n), share(n, total))
	}
	return fmt.Sprintf("about %s (%s)", count(n), share(n, total))
}

// escaped is text as HTML.
func escaped(text string) template.HTML { return template.HTML(template.HTMLEscapeString(text)) }
