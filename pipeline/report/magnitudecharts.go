package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"catenrich/internal/exact"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// planeCharts are absolute magnitude against redshift, one a band, under the
// first cosmology.
func planeCharts(r *Release, a *zAxis) (list []*chart) {
	for i := range r.Settings.Bands {
		b := &r.Settings.Bands[i]
		name := r.name("absolute_magnitude_"+b.Name, 0)
		both := columns.PairName(name, columns.RedshiftStatistic)
		if h := r.histogram(both, ledger.PlaneRedshiftAxis(), ledger.PlaneMagnitudeAxis(name)); h != nil {
			list = append(list, planeChart(r, a, h, b, fmt.Sprintf("plane%d", i)))
		}
	}
	return list
}

func planeChart(r *Release, a *zAxis, h *ledger.Histogram, b *job.BandSettings, id string) *chart {
	c := newChart(id, fmt.Sprintf("Absolute magnitude in %s against redshift", b.Name))
	a.put(c)
	z, mag := h.Axes()[0], h.Axes()[1]
	total, top, outside := int64(0), int64(1), int64(0)
	byMagnitude := make(map[int64]int64)
	for cell := range h.Cells {
		total, top = total+cell.Count, max(top, cell.Count)
		if cell.Keys[1] < mag.First || cell.Keys[1] >= mag.End {
			outside += cell.Count
			continue
		}
		byMagnitude[cell.Keys[1]] += cell.Count
	}
	brightest, faintest := magnitudeRange(byMagnitude, total)
	c.y.low, c.y.high = mag.Edge(faintest+1), mag.Edge(brightest) // bright is up
	c.axes("cosmological redshift z", fmt.Sprintf("absolute magnitude in %s, mag", b.Name), c.x.ticks(5), flipped(&c.y))
	var shades [6]strings.Builder // from the fullest cells to the emptiest, each a third of the last
	for cell := range h.Cells {
		x1, x2 := z.Edge(cell.Keys[0]), z.Edge(cell.Keys[0]+1)
		if x1 < a.low*(1-1e-12) || x2 > a.high*(1+1e-12) || cell.Keys[1] < brightest || cell.Keys[1] > faintest {
			outside += cell.Count
			continue
		}
		shade := 0
		for limit := top; limit > cell.Count*2 && shade < len(shades)-1; limit /= 3 {
			shade++
		}
		fmt.Fprintf(&shades[shade], "M%s %sH%sV%sH%sZ", spot(c.x.at(x1)), spot(c.y.at(mag.Edge(cell.Keys[1]))), spot(c.x.at(x2)), spot(c.y.at(mag.Edge(cell.Keys[1]+1))), spot(c.x.at(x1)))
	}
	for i := range shades {
		c.add(`<path class="shade s%d" d="%s"/>`, len(shades)-i, shades[i].String())
	}
	note := fmt.Sprintf("%s; a stronger colour is more. Bright is up.", plural(total, "row"))
	for i := range r.Settings.Selections {
		note += drawLimits(c, r, a, b, &r.Settings.Selections[i])
	}
	c.Note = escaped(note)
	c.Desc = fmt.Sprintf("%s lie between %s and %s mag. %s", plural(total, "row"), fixed(c.y.low, 1), fixed(c.y.high, 1), note)
	return c
}

// magnitudeRange is the bins that hold all but a thousandth of the rows.
func magnitudeRange(counts map[int64]int64, total int64) (brightest, faintest int64) {
	var keys []int64
	for k := range counts {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	if len(keys) == 0 {
		return -44, -36
	}
	few := max(total/1000, 0)
	brightest, faintest = keys[0], keys[len(keys)-1]
	for sum, i := int64(0), 0; i < len(keys); i++ {
		if sum += counts[keys[i]]; sum > few {
			brightest = keys[i]
			break
		}
	}
	for sum, i := int64(0), len(keys)-1; i >= 0; i-- {
		if sum += counts[keys[i]]; sum > few {
			faintest = keys[i]
			break
		}
	}
	return brightest, max(faintest, brightest+3)
}

// flipped are the ticks of a scale that runs from high to low.
func flipped(s *scale) []tick {
	up := scale{low: s.high, high: s.low}
	return up.ticks(5)
}

// drawLimits draws what a selection can hold of a band, and says so.
func drawLimits(c *chart, r *Release, a *zAxis, b *job.BandSettings, s *job.SelectionSettings) (note string) {
	for i := range s.Limits {
		l := &s.Limits[i]
		if l.Band != b.Name {
			continue
		}
		k := &b.K
		if l.K != nil {
			k = l.K
		}
		zs := slices.DeleteFunc(a.samples(), func(z float64) bool { return z < s.Redshift[0] || z > s.Redshift[1] })
		if len(zs) < 2 {
			return fmt.Sprintf(" The redshift limits of %s are not on the axis.", s.Name)
		}
		drawn := ""
		for _, limit := range []struct {
			at    *float64
			class string
			name  string
		}{{l.Faint, "limit", "faint"}, {l.Bright, "limit wide", "bright"}} {
			if limit.at == nil {
				continue
			}
			ys := moduli(r.models[0], zs)
			for i, z := range zs {
				ys[i] = *limit.at - ys[i] - kOf(k, z) - float64(b.Q*(b.Z0-z))
				if r.Settings.LengthUnit == "Mpc/h" {
					ys[i] -= float64(5 * exact.Log10(r.models[0].Params().H0/100))
				}
			}
			c.path(limit.class, zs, ys)
			if drawn != "" {
				drawn += ", "
			}
			drawn += fmt.Sprintf("%s limit %s mag", limit.name, plain(*limit.at))
		}
		if drawn == "" {
			return fmt.Sprintf(" The limits of %s are a column of the catalogue, and not drawn.", s.Name)
		}
		note = fmt.Sprintf(" Line: selection %s, %s, z %s to %s", s.Name, drawn, plain(s.Redshift[0]), plain(s.Redshift[1]))
		if k.Kind == "table" || k.Kind == "sed" || k.Kind == "column" {
			note += " (drawn without its K-correction, which the manifest does not hold)"
		}
		return note + "."
	}
	return ""
}

// kOf is the K-correction where the settings say all of it: a power law.
func kOf(k *job.KSettings, z float64) float64 {
	if k.Kind != "power_law" {
		return 0
	}
	return float64(-2.5*(1+k.Alpha)*exact.Log10(1+z)) + float64(2.5*k.Alpha*exact.Log10(1+k.RestRedshift))
}

// volumeCharts are V/Vmax, one a selection and model.
func volumeCharts(r *Release) (list []*chart) {
	for _, s := range spreads(r) {
		h := r.histogram(s.Name, ledger.FractionAxis(s.Name))
		if h == nil {
			continue
		}
		list = append(list, volumeChart(h, s, fmt.Sprintf("volume%d", len(list))))
	}
	return list
}

func volumeChart(h *ledger.Histogram, s spread, id string) *chart {
	const bins = 20
	c := newChart(id, "V/Vmax: "+s.Name)
	axis := h.Axes()[0]
	per := max((axis.End-axis.First)/bins, 1)
	edges, heights := make([]float64, bins+1), make([]float64, bins)
	for i := range edges {
		edges[i] = float64(i) / bins
	}
	for cell := range h.Cells {
		heights[min(max((cell.Keys[0]-axis.First)/per, 0), bins-1)] += float64(cell.Count)
	}
	expected := float64(s.N) / bins
	scatter := math.Sqrt(expected)
	c.x.high = 1
	c.y.high = max(slices.Max(heights), expected+float64(3*scatter)) * 1.08
	c.axes("V/Vmax", "rows in a bar", c.x.ticks(5), wholeTicks(&c.y))
	c.steps("fill", edges, heights, true)
	low, high := c.y.at(max(expected-float64(2*scatter), 0)), c.y.at(expected+float64(2*scatter))
	c.add(`<rect class="band" x="%s" y="%s" width="%s" height="%s"/>`, spot(c.x.from), spot(high), spot(c.x.to-c.x.from), spot(low-high))
	c.line(c.x.from, c.y.at(expected), c.x.to, c.y.at(expected), "limit")
	finding := fmt.Sprintf("Mean %s, expected 0.5 ± %s: %s σ.", fixed(s.Mean, 4), fixed(s.Sigma, 4), signed(s.Away(), 1))
	c.Note = escaped(finding + " Line and band: an even spread, ± 2√n.")
	c.Desc = fmt.Sprintf("%s. %s First bar %s rows, last bar %s; an even spread has %s.", plural(s.N, "row"), finding, fixed(heights[0], 0), fixed(heights[bins-1], 0), fixed(expected, 0))
	return c
}
