package cosmo

import (
	"math"
	"sync"

	"catenrich/internal/exact"
)

// Every quantity is tabulated as polynomials over cells in x = 1+z. A cell is
// found without a logarithm: an octave by the exponent of the float64 x, the
// cell within by the top bits of its mantissa. The local variable t is z less
// the z of the cell's edge nearest z = 0, formed from z itself, so that in the
// cells that touch z = 0 it is z with all its digits.

const (
	order       = 8  // coefficients of a polynomial
	firstOctave = -7 // the cells begin at x = 2^-7 ...
	lastOctave  = 13 // ... and end at x = 2^14
	octaves     = lastOctave - firstOctave + 1
	leastBits   = 5  // cells in an octave: 2^5 ...
	mostBits    = 11 // ... to 2^11

	mantissa = 52 // bits
)

// A polynomial is a quantity in one cell: p[0] + p[1] t + ... + p[7] t^7.
type polynomial [order]float64

// at evaluates the polynomial.
func (p *polynomial) at(t float64) float64 {
	return p[0] + float64(t*(p[1]+float64(t*(p[2]+float64(t*(p[3]+float64(t*(p[4]+float64(t*(p[5]+float64(t*(p[6]+float64(t*p[7])))))))))))))
}

// An octave says where its cells are.
type octave struct {
	mask  uint64 // of the bits of the cell's lower edge
	up    uint64 // added to them to give the edge nearest z = 0
	first int32  // index of its first cell
	shift uint8  // mantissa bits below those that count cells
	slow  bool   // no cells: too sharp a model, quantities are integrated row by row
}

// cut sets the number of cells to 2^bits.
func (o *octave) cut(bits int, past bool) {
	o.shift = uint8(mantissa - bits)
	o.mask = ^uint64(1<<o.shift - 1)
	o.up = 0
	if !past {
		o.up = 1 << o.shift
	}
}

// tables are the cells of a model. Cell 0 lies nowhere and holds NaN.
type tables struct {
	lowest  float64 // rows need z > lowest
	octaves [octaves]octave
	cells   []span

	distance, time, rate []polynomial     // D_C, lookback, E
	age                  []float64        // at the cell's edge nearest z = 0
	nodes                [][order]float64 // E at the nodes

	once struct{ base, transverse, slope, volume, drift sync.Once }

	transverse, slope, volume, drift []polynomial
}

// A span is where a cell lies: from edge (nearest z = 0) over width, which is
// negative for z < 0.
type span struct{ edge, width float64 }

// locate returns the cell of z and t, for z anywhere between the ends of the
// cells. An octave without cells gives cell -1.
func (t *tables) locate(z float64) (cell int32, local float64) {
	b := math.Float64bits(1 + z)
	o := &t.octaves[b>>mantissa-(1023+firstOctave)]
	if o.slow {
		return -1, z
	}
	return o.find(b, z)
}

// find is locate within an octave; b is the bits of 1+z.
func (o *octave) find(b uint64, z float64) (cell int32, local float64) {
	edge := math.Float64frombits(b&o.mask + o.up)
	return o.first + int32(b&(1<<mantissa-1)>>(o.shift&63)), z - (edge - 1)
}

// chebyshev holds the nodes of a cell as fractions of its width, and the
// transform from values there to Chebyshev coefficients.
var chebyshev = func() (c struct {
	node      [order]float64
	transform [order][order]float64 // [k][j]
	monomial  [order][order]float64 // [k][i]: coefficient of s^i in T_k(2s-1)
}) {
	for j := range order {
		c.node[j] = 0.5 * (1 + cosSixteenth(2*j+1))
		for k := range order {
			c.transform[k][j] = 2.0 / order * cosSixteenth(k*(2*j+1))
		}
		c.transform[0][j] = 1.0 / order
	}
	c.monomial[0][0] = 1
	c.monomial[1][0], c.monomial[1][1] = -1, 2
	for k := 2; k < order; k++ { // T_k+1 = 2(2s-1) T_k - T_k-1
		for i := range order {
			v := float64(-2*c.monomial[k-1][i]) - c.monomial[k-2][i]
			if i > 0 {
				v += float64(4 * c.monomial[k-1][i-1])
			}
			c.monomial[k][i] = v // small integers: exact
		}
	}
	return c
}()

// cosSixteenth returns cos(pi n/16) with the symmetry of the cosine exactly.
func cosSixteenth(n int) float64 {
	n %= 32
	switch {
	case n > 16:
		return cosSixteenth(32 - n)
	case n > 8:
		return -cosSixteenth(16 - n)
	case n == 8:
		return 0
	}
	return exact.Cos(math.Pi / 16 * float64(n))
}

// A fit is the Chebyshev coefficients of a function over a cell.
type fit [order]float64

// newFit fits the values at the nodes. It works on their differences from one
// of them, which keeps the rounding errors small.
func newFit(values *[order]float64) (f fit) {
	base := values[order/2]
	for k := range order {
		for j, v := range values {
			f[k] += float64(chebyshev.transform[k][j] * (v - base))
		}
	}
	f[0] += base
	return f
}

// roughness estimates the relative error of the fit without its last term.
func (f *fit) roughness() float64 {
	r := max(math.Abs(f[order-1]), math.Abs(f[order-2])/128) / math.Abs(f[0])
	if r != r {
		return math.Inf(1)
	}
	return r
}

// expand returns the fit as powers of t, the first terms of it.
func (f *fit) expand(width float64, terms int) (p polynomial) {
	for k := terms - 1; k >= 0; k-- { // small terms first
		for i := range terms {
			p[i] += float64(f[k] * chebyshev.monomial[k][i])
		}
	}
	scale := 1.0
	for i := range p {
		p[i] *= scale // exact: the width is a power of 2
		scale /= width
	}
	return p
}

// integral returns the polynomial that is start at t = 0 and has the fit, but
// for its last term, as its derivative.
func (f *fit) integral(start, width float64) (p polynomial) {
	d := f.expand(width, order-1)
	p[0] = start
	for i := 1; i < order; i++ {
		p[i] = d[i-1] / float64(i)
	}
	return p
}

// whole returns the integral of the fit over the cell, with sign.
func (f *fit) whole(width float64) float64 {
	sum := 0.0
	for k := order - 2; k >= 0; k -= 2 { // int_0^1 T_k(2s-1) ds = -1/(k^2-1), k even
		sum -= f[k] / float64(k*k-1)
	}
	return float64(sum * width)
}

// A total is a sum that carries its rounding error (Neumaier 1974).
type total struct{ sum, rest float64 }

func (t *total) add(v float64) {
	s := t.sum + v
	if math.Abs(t.sum) >= math.Abs(v) {
		t.rest += (t.sum - s) + v
	} else {
		t.rest += (v - s) + t.sum
	}
	t.sum = s
}

func (t *total) value() float64 { return t.sum + t.rest }
