package report

import (
	"fmt"
	"math"
	"strings"

	"catenrich/internal/exact"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/ledger"
)

// luminosityCharts are 1/Vmax luminosity functions (Schmidt 1968; Felten
// 1976): phi = sum w / (bin width), its error sqrt(sum w^2) / (bin width), one
// a selection and model.
func luminosityCharts(r *Release) (list []*chart) {
	for m := range r.models {
		for i := range r.Settings.Selections {
			s := &r.Settings.Selections[i]
			band := s.Limits[0].Band
			mag := r.name("absolute_magnitude_"+band, m)
			d := r.Tally.Densities[columns.PairName(r.name("vmax_weight_"+s.Name, m), mag)]
			if d == nil || d.Axis() != ledger.DensityMagnitudeAxis(mag) {
				continue
			}
			if c := luminosityChart(r, d, s.Name, band, m, fmt.Sprintf("lf%d", len(list))); c != nil {
				list = append(list, c)
			}
		}
	}
	return list
}

// point is one magnitude bin of a luminosity function.
type point struct {
	mag, phi, err float64
	n             int64
}

func points(d *ledger.Density) (list []point, width float64) {
	axis := d.Axis()
	width = axis.Edge(axis.First+1) - axis.Edge(axis.First)
	for c := range d.Cells {
		if c.Key >= axis.First && c.Key < axis.End && c.Weights > 0 && c.Weights < huge && c.Squares < huge {
			list = append(list, point{middle(&axis, c.Key), c.Weights / width, math.Sqrt(c.Squares) / width, c.Count})
		}
	}
	return list, width
}

func luminosityChart(r *Release, d *ledger.Density, selection, band string, model int, id string) *chart {
	list, width := points(d)
	if len(list) == 0 {
		return nil
	}
	c := newChart(id, fmt.Sprintf("Luminosity function in %s: %s%s", band, selection, r.Settings.Cosmologies[model].Suffix))
	c.x.low, c.x.high = list[0].mag-width, list[len(list)-1].mag+width
	low, high := math.Inf(1), 0.0
	rows := int64(0)
	for _, p := range list {
		low, high = min(low, p.phi), max(high, p.phi+p.err)
		rows += p.n
	}
	c.y.log = true
	c.y.low = exact.Exp10(math.Floor(exact.Log10(low)))
	c.y.high = max(exact.Exp10(math.Ceil(exact.Log10(high))), c.y.low*10)
	unit := r.Settings.LengthUnit
	if unit == "Mpc/h" {
		unit = "(Mpc/h)"
	}
	c.axes(fmt.Sprintf("absolute magnitude in %s, mag", band), fmt.Sprintf("φ, %s⁻³ mag⁻¹", unit), c.x.ticks(6), c.y.ticks(5))
	for _, p := range list {
		x := c.x.at(p.mag)
		up, down := c.y.at(p.phi+p.err), c.y.from
		if p.phi-p.err > c.y.low {
			down = c.y.at(p.phi - p.err)
		}
		c.line(x, up, x, down, "error")
		class := "dot"
		if p.n < few {
			class = "dot hollow"
		}
		c.add(`<circle class="%s" cx="%s" cy="%s" r="3.2"/>`, class, spot(x), spot(c.y.at(p.phi)))
	}
	note := fmt.Sprintf("1/Vmax, %s in bins of %s mag; bars are √Σw². Hollow: fewer than %d rows. %s.", plural(rows, "row"), fixed(width, 1), few, r.modelName(model))
	c.Note = escaped(note)
	var values strings.Builder
	for _, p := range list {
		fmt.Fprintf(&values, " %s: %s ± %s (%s);", fixed(p.mag, 2), number(p.phi, 3), number(p.err, 2), count(p.n))
	}
	c.Desc = note + " Magnitude: density ± error (rows):" + strings.TrimSuffix(values.String(), ";") + "."
	return c
}

// huge is beyond any density: a sum that overflowed.
const huge = 1e300

// few is how many rows make a bin worth a full dot.
const few = 10
