package report

import (
	"fmt"
	"html/template"
	"strings"

	"catenrich/pipeline/columns"
	"catenrich/pipeline/ledger"
)

// A strip is how large the errors of one column are.
type strip struct {
	Name              string
	Median, Low, High string // half of the errors are below; nine in ten are between
	Picture           template.HTML
	histogram         *ledger.Histogram
	low, median, high float64
	n                 int64
}

// A stripGroup is strips on one scale: relative errors, or absolute ones.
type stripGroup struct {
	Title, From, To string
	Strips          []strip
}

// errorStrips lists the errors of the release, relative ones first.
func errorStrips(r *Release) (groups []stripGroup) {
	relative, absolute := stripGroup{Title: "Relative errors"}, stripGroup{Title: "Absolute errors (magnitudes, redshifts)"}
	for _, c := range r.Tally.Columns {
		value, ok := errorOf(c.Name, r)
		if !ok {
			continue
		}
		both := columns.PairName(c.Name, value)
		if h := r.histogram(both, ledger.ErrorAxis(both)); h != nil {
			relative.take(value, h)
		} else if h := r.histogram(c.Name, ledger.ErrorAxis(c.Name)); h != nil {
			absolute.take(value, h)
		}
	}
	for _, g := range []stripGroup{relative, absolute} {
		if len(g.Strips) > 0 {
			g.draw()
			groups = append(groups, g)
		}
	}
	return groups
}

// errorOf is the column that an error belongs to.
func errorOf(name string, r *Release) (value string, ok bool) {
	for i := range r.Settings.Cosmologies {
		suffix := r.Settings.Cosmologies[i].Suffix
		if bare, ok := strings.CutSuffix(name, "_error"+suffix); ok {
			return bare + suffix, true
		}
	}
	bare, ok := strings.CutSuffix(name, "_error")
	return bare, ok
}

// take adds a column's errors, if there are any.
func (g *stripGroup) take(name string, h *ledger.Histogram) {
	s := strip{Name: name, histogram: h}
	axis := h.Axes()[0]
	for c := range h.Cells {
		if c.Keys[0] >= axis.First && c.Keys[0] < axis.End {
			s.n += c.Count
		}
	}
	if s.n == 0 {
		return
	}
	low, mid, high := quantileKey(h, s.n, 0.05), quantileKey(h, s.n, 0.5), quantileKey(h, s.n, 0.95)
	s.low, s.median, s.high = axis.Edge(low), middle(&axis, mid), axis.Edge(high+1)
	s.Low, s.Median, s.High = g.value(s.low), g.value(s.median), g.value(s.high)
	g.Strips = append(g.Strips, s)
}

// value is an error in words: relative ones in per cent.
func (g *stripGroup) value(v float64) string {
	if strings.HasPrefix(g.Title, "Relative") {
		return number(100*v, 2) + space + "%"
	}
	return number(v, 2)
}

// draw makes the pictures, all on one logarithmic scale.
func (g *stripGroup) draw() {
	const width, height, edge = 200, 30, 3
	low, high := g.Strips[0].low, g.Strips[0].high
	for _, s := range g.Strips {
		low, high = min(low, s.low), max(high, s.high)
	}
	x := scale{low: low / 2, high: high * 2, from: edge, to: width - edge, log: true}
	g.From, g.To = g.value(x.low), g.value(x.high)
	for i := range g.Strips {
		s := &g.Strips[i]
		axis, most := s.histogram.Axes()[0], int64(1)
		for c := range s.histogram.Cells {
			most = max(most, c.Count)
		}
		var b strings.Builder
		fmt.Fprintf(&b, `<svg viewBox="0 0 %d %d" aria-hidden="true"><path class="grid" d="M0 %d.5H%d"/><path class="fill" d="`, width, height, height-4, width)
		for c := range s.histogram.Cells {
			if c.Keys[0] < axis.First || c.Keys[0] >= axis.End {
				continue
			}
			from, to := axis.Edge(c.Keys[0]), axis.Edge(c.Keys[0]+1)
			if from < x.low || to > x.high {
				continue
			}
			tall := float64(float64(c.Count) / float64(most) * (height - 8))
			fmt.Fprintf(&b, "M%s %dV%sH%sV%dZ", spot(x.at(from)), height-4, spot(height-4-tall), spot(x.at(to)), height-4)
		}
		m := spot(x.at(s.median))
		fmt.Fprintf(&b, `"/><path class="middle" d="M%s 2V%d"/><path class="range" d="M%s %dH%s"/></svg>`, m, height-4, spot(x.at(s.low)), height-2, spot(x.at(s.high)))
		s.Picture = template.HTML(b.String())
	}
}
