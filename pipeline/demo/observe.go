package demo

import (
	"math"
	"strconv"

	"catenrich/internal/exact"
)

// A truth is an object as it is.
type truth struct {
	id         string
	field      *field
	kind       uint8
	defect     uint8
	template   int
	ra, dec    float64
	zcos       float64 // NaN for what takes no part in the expansion
	zcmb, zhel float64
	velocity   float64 // peculiar, km/s
	ebv        float64
	modulus    float64
	evolution  float64
	corrected  [bands]float64 // apparent magnitude without dust and noise
	absolute   [bands]float64
	k          [bands]float64
	extinction [bands]float64
}

// A survey makes the objects of a plan, one after the other.
type survey struct {
	slots    []slot
	sampler  *sampler
	infrared *synthetic
	observer observer
	dice     *dice
	shares   [2][]float64 // of the templates in "main" and "deep"
}

func newSurvey(o Options) (*survey, error) {
	u, err := newUniverse()
	if err != nil {
		return nil, err
	}
	s := &survey{
		slots: plan(o.Rows, newDice(o.Seed, 1)), dice: newDice(o.Seed, 2),
		sampler: newSampler(u), infrared: newSynthetic(),
	}
	for _, t := range templates {
		s.shares[0], s.shares[1] = append(s.shares[0], t.inMain), append(s.shares[1], t.inDeep)
	}
	return s, nil
}

// make fills t and r with object i: what is there, and what was seen.
func (s *survey) make(i int, t *truth, r *record) {
	slot := s.slots[i]
	*t = truth{field: &mainField, kind: slot.kind, defect: slot.defect}
	if slot.deep {
		t.field = &deepField
	}
	switch {
	case slot.kind == star || slot.kind == blueshifted:
		s.local(t)
	case slot.deep:
		s.deep(t)
	default:
		s.main(t)
	}
	t.id = s.identifier(t, i)
	s.observe(t, r)
	if spoil := defects[t.defect].spoil; spoil != nil {
		spoil(r, s.dice)
	}
}

// identifier is 19 digits: the field's, six of a position, and the row's.
func (s *survey) identifier(t *truth, i int) string {
	b := append(make([]byte, 0, 24), t.field.idPrefix...)
	b = strconv.AppendInt(b, 1000000+int64(s.dice.below(1000000)), 10)
	b = append(b[:4], b[5:]...)
	b = strconv.AppendInt(b, 1000000000+int64(i), 10)
	b = append(b[:10], b[11:]...)
	return string(b)
}

// main draws galaxies until the flux limit lets one pass.
func (s *survey) main(t *truth) {
	for {
		var m float64
		t.template, m, t.zcos = s.sampler.draw(s.dice)
		t.ra, t.dec = t.field.place(s.dice)
		s.observer.move(t, s.dice)
		s.shine(t, m)
		if t.corrected[bandR] < FluxLimit {
			return
		}
	}
}

// deep draws an object of the deep field: here the apparent magnitude is given
// and the luminosity follows.
func (s *survey) deep(t *truth) {
	var seen float64
	switch t.kind {
	case quasar:
		t.template, t.zcos, seen = quasarSED, s.dice.between(0.8, 6), s.dice.between(20.5, 22.5)
	case candidate:
		t.template, t.zcos, seen = irregular, s.dice.between(7, highest), s.dice.between(25, 26.5)
	default:
		t.template, t.zcos, seen = s.dice.pick(s.shares[1]), deepRedshift(s.dice), deepMagnitude(s.dice)
	}
	t.ra, t.dec = t.field.place(s.dice)
	s.observer.move(t, s.dice)
	s.shine(t, 0)
	s.shine(t, seen-t.corrected[bandR])
}

// shine makes an object of absolute magnitude m in r visible: all but the dust.
func (s *survey) shine(t *truth, m float64) {
	form := &templates[t.template]
	t.modulus = s.sampler.modulus(t.zcos, t.zcmb, t.zhel)
	t.evolution = evolution(t.zcos)
	t.absolute = [bands]float64{m + form.color(), m, m - form.redder}
	power := form.powerLawK(t.zhel)
	t.k = [bands]float64{power, power, s.infrared.at(t.zhel)}
	for b := range bands {
		t.corrected[b] = t.absolute[b] + t.modulus + t.k[b] + t.evolution
	}
}

// local makes what takes no part in the expansion: it has no luminosity that a
// redshift could tell.
func (s *survey) local(t *truth) {
	d := s.dice
	t.ra, t.dec = t.field.place(d)
	t.zcos, t.zcmb, t.modulus, t.velocity = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	for b := range bands {
		t.absolute[b], t.k[b] = math.NaN(), math.NaN()
	}
	t.evolution = math.NaN()
	t.template = starSED
	r, gr, ri := d.between(15.5, 19.7), d.between(0.4, 1.4), d.between(0.1, 0.6)
	t.zhel = -0.00003 - float64(0.0004*math.Abs(d.gauss()))
	if t.kind == blueshifted {
		t.template = irregular
		t.zhel = d.between(-0.0009, -0.0001)
	}
	t.corrected = [bands]float64{r + gr, r, r - ri}
}

// observe writes down what the survey measured. Every error that it quotes is
// the width from which the noise was drawn.
func (s *survey) observe(t *truth, r *record) {
	d := s.dice
	r[colID], r[colField] = text(t.id), text(t.field.name)
	r[colRA], r[colDec] = number(t.ra), number(t.dec)
	s.measureRedshift(t, r)
	s.measureLight(t, r)
	r[colTemplate], r[colKG], r[colRemarks] = text("star"), missing, missing
	if t.template != starSED {
		r[colTemplate] = text(templates[t.template].name)
		if z := r[colZBest].number; z > 0 {
			r[colKG] = number(round(templates[t.template].powerLawK(z), 5))
		}
	}
	if d.chance(0.03) {
		r[colRemarks] = text(remarks[d.below(len(remarks))])
	}
}

// measureLight draws dust and noise.
func (s *survey) measureLight(t *truth, r *record) {
	d := s.dice
	ebv, ebvErr := t.field.reddening(d, t.ra, t.dec)
	t.ebv = ebv + float64(ebvErr*d.gauss())
	r[colEBV], r[colEBVErr] = number(ebv), number(ebvErr)
	var sigma [bands]float64
	var m [bands]float64
	for b := range bands {
		t.extinction[b] = float64(extinctionPerEBV[b] * t.ebv)
		m[b] = t.corrected[b] + t.extinction[b]
		faint := t.field.noise * exact.Exp10(0.3*(m[b]-t.field.depth))
		sigma[b] = round(math.Sqrt(square(0.015)+square(faint)), 4)
	}
	r[colMagG], r[colMagErrG] = number(round(m[bandG]+float64(sigma[bandG]*d.gauss()), 4)), number(sigma[bandG])
	r[colMagR], r[colMagErrR] = number(round(m[bandR]+float64(sigma[bandR]*d.gauss()), 4)), number(sigma[bandR])
	r[colSNR] = number(round(2.5/ln10/sigma[bandR], 1))

	flux := exact.Exp10(0.4 * (22.5 - m[bandI])) // nanomaggies
	ivar := significant(1/(square(0.4*ln10*sigma[bandI])*square(flux)), 6)
	r[colFluxI] = number(significant(flux+float64(d.gauss()/math.Sqrt(ivar)), 7))
	r[colIvarI] = number(ivar)
}

func square(x float64) float64 { return float64(x * x) }

// significant rounds x to a number of decimal digits.
func significant(x float64, digits int) float64 {
	var b [32]byte
	y, _ := strconv.ParseFloat(string(strconv.AppendFloat(b[:0], x, 'e', digits-1, 64)), 64)
	return y
}
