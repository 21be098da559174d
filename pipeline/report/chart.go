package report

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"
	"strings"

	"catenrich/internal/exact"
)

// The size of a chart in its own units. It is drawn at about this many CSS
// pixels, so that its text can be read on a telephone: there it fills the
// width, and on a wide screen several stand side by side.
const (
	chartWidth  = 360
	chartHeight = 236
)

// A scale places values along an axis.
type scale struct {
	low, high float64
	from, to  float64 // where low and high are, in the chart's units
	log       bool
}

// at is the place of v.
func (s *scale) at(v float64) float64 {
	part := (v - s.low) / (s.high - s.low)
	if s.log {
		part = exact.Log10(v/s.low) / exact.Log10(s.high/s.low)
	}
	return s.from + float64(part*(s.to-s.from))
}

// clamp is v, or the end of the scale that it lies beyond.
func (s *scale) clamp(v float64) float64 { return min(max(v, s.low), s.high) }

// A tick is a mark on an axis.
type tick struct {
	at    float64
	label string
}

// ticks chooses about n round values.
func (s *scale) ticks(n int) []tick {
	if span := s.high - s.low; !(span > 0 && span <= math.MaxFloat64) || s.log && !(s.low > 0) {
		return nil
	}
	if s.log {
		return s.logTicks(n)
	}
	span := s.high - s.low
	step := exact.Exp10(math.Floor(exact.Log10(span / float64(n))))
	for _, factor := range []float64{1, 2, 2.5, 5, 10} {
		if span/(step*factor) <= float64(n)+0.5 {
			step *= factor
			break
		}
	}
	places := 0
	for unit := step; places < 6 && math.Abs(unit-math.Round(unit)) > 1e-6; unit *= 10 {
		places++
	}
	var list []tick
	for k := math.Ceil(s.low/step - 1e-9); float64(k*step) <= s.high+float64(1e-9*step); k++ {
		v := k * step
		list = append(list, tick{v, fixed(v, places)})
	}
	return list
}

// logTicks are powers of ten, with twos and fives where there is room.
func (s *scale) logTicks(n int) []tick {
	decades := exact.Log10(s.high / s.low)
	factors := []float64{1}
	switch {
	case decades*3 <= float64(n)+1:
		factors = []float64{1, 2, 5}
	case decades*2 <= float64(n)+1:
		factors = []float64{1, 3}
	}
	first, last := int(math.Floor(exact.Log10(s.low))), int(math.Floor(exact.Log10(s.high)))
	every := (last - first + n) / n
	var list []tick
	for k := first; k <= last; k++ {
		for _, f := range factors {
			v := f * exact.Exp10(float64(k))
			if v < s.low*(1-1e-9) || v > s.high*(1+1e-9) || mod(k, every) != 0 {
				continue
			}
			label := power(k)
			if f != 1 {
				label = strconv.FormatFloat(v, 'g', 1, 64)
				if v >= 1e4 || v < 1e-3 {
					label = ""
				} else if v >= 1 {
					label = strconv.FormatFloat(v, 'f', 0, 64)
				}
			}
			list = append(list, tick{v, label})
		}
	}
	return list
}

func mod(a, b int) int { return ((a % b) + b) % b }

// A chart is a picture under construction, in SVG. Marks are drawn in the
// order of the calls; colours come from the page's style by class.
type chart struct {
	ID    string
	Title string // what it shows
	Desc  string // what there is to see, for those who cannot
	Note  template.HTML

	x, y   scale
	height float64
	body   strings.Builder
}

func newChart(id, title string) *chart {
	c := &chart{ID: id, Title: title, height: chartHeight}
	c.x = scale{from: 46, to: chartWidth - 12}
	c.y = scale{from: chartHeight - 36, to: 26}
	return c
}

// spot is a coordinate as text.
func spot(v float64) string { return strconv.FormatFloat(v, 'f', 1, 64) }

func (c *chart) add(format string, args ...any) { fmt.Fprintf(&c.body, format, args...) }

// text writes a label; anchor is start, middle or end.
func (c *chart) text(x, y float64, anchor, class, label string) {
	c.add(`<text x="%s" y="%s" text-anchor="%s" class="%s">%s</text>`, spot(x), spot(y), anchor, class, html.EscapeString(label))
}

// line draws a straight line.
func (c *chart) line(x1, y1, x2, y2 float64, class string) {
	c.add(`<path class="%s" d="M%s %sL%s %s"/>`, class, spot(x1), spot(y1), spot(x2), spot(y2))
}

// axes draws the frame, the ticks and what is on each axis.
func (c *chart) axes(xLabel, yLabel string, xTicks, yTicks []tick) {
	c.grid(yTicks)
	c.line(c.x.from, c.y.from, c.x.to, c.y.from, "axis")
	for _, t := range xTicks {
		x := c.x.at(t.at)
		c.line(x, c.y.from, x, c.y.from+4, "axis")
		c.text(x, c.y.from+16, "middle", "tick", t.label)
	}
	c.text((c.x.from+c.x.to)/2, c.y.from+32, "middle", "label", xLabel)
	c.text(4, 13, "start", "label", yLabel)
}

func (c *chart) grid(ticks []tick) {
	for _, t := range ticks {
		y := c.y.at(t.at)
		c.line(c.x.from, y, c.x.to, y, "grid")
		c.text(c.x.from-5, y+4, "end", "tick", t.label)
	}
}

// path draws a line through points, broken where one is NaN or leaves the
// vertical scale.
func (c *chart) path(class string, xs, ys []float64) {
	var d strings.Builder
	down := false
	low, high := min(c.y.low, c.y.high), max(c.y.low, c.y.high)
	for i := range xs {
		if !(ys[i] >= low && ys[i] <= high) {
			down = false
			continue
		}
		d.WriteString(map[bool]string{false: "M", true: "L"}[down])
		d.WriteString(spot(c.x.at(xs[i])) + " " + spot(c.y.at(ys[i])))
		down = true
	}
	if d.Len() > 0 {
		c.add(`<path class="%s" d="%s"/>`, class, d.String())
	}
}

// steps draws a histogram's outline: heights[i] between edges[i] and
// edges[i+1]. A filled one is closed along the axis.
func (c *chart) steps(class string, edges, heights []float64, filled bool) {
	var d strings.Builder
	base := c.y.from
	fmt.Fprintf(&d, "M%s %s", spot(c.x.at(edges[0])), spot(base))
	for i, h := range heights {
		fmt.Fprintf(&d, "V%sH%s", spot(c.y.at(c.y.clamp(h))), spot(c.x.at(edges[i+1])))
	}
	fmt.Fprintf(&d, "V%s", spot(base))
	if filled {
		d.WriteString("Z")
	}
	c.add(`<path class="%s" d="%s"/>`, class, d.String())
}

// SVG is the finished picture.
func (c *chart) SVG() template.HTML {
	var b strings.Builder
	fmt.Fprintf(&b, `<svg viewBox="0 0 %d %s" role="img" aria-labelledby="%s-t %s-d"><title id="%s-t">%s</title><desc id="%s-d">%s</desc>`,
		chartWidth, strconv.FormatFloat(c.height, 'f', 0, 64), c.ID, c.ID, c.ID, html.EscapeString(c.Title), c.ID, html.EscapeString(c.Desc))
	b.WriteString(c.body.String())
	b.WriteString("</svg>")
	return template.HTML(b.String())
}
