package cosmo

import (
	"fmt"
	"math"
	"slices"
	"sync"

	"catenrich/internal/exact"
)

// A Model is an expanding universe whose parameters have been checked. It is
// immutable, so any number of goroutines may share one; what is costly is
// computed once, when first asked for.
type Model struct {
	params Params
	e      expansion

	photons, neutrinos float64 // densities today
	hubbleDistance     float64 // Mpc
	hubbleTime         float64 // Gyr

	turns      bool    // E^2 falls to 0 in the future
	turnAround float64 // at this z; NaN if it does not
	startX     float64 // x there, 0 if it does not
	aging      bool    // the age is finite
	bounded    bool    // the particle horizon is finite
	horizon    bool    // there is an event horizon

	past    tables
	future  futureTable
	scalars func() pastScalars
	special func() specialRedshifts
}

// New returns the model that p defines. The error joins a *[ParamError] for
// each number that is wrong; if there is none, for a model without a big bang,
// where E^2 falls to zero or below at some z >= 0.
func New(p Params) (*Model, error) {
	if err := p.check(); err != nil {
		return nil, err
	}
	p.NeutrinoMasses = slices.Clone(p.NeutrinoMasses)
	m := &Model{params: p}
	m.hubbleDistance = SpeedOfLight / p.H0
	m.hubbleTime = 1 / (p.H0 * (hubbleToSI * gigayear))
	m.fillDensities()
	for _, v := range []float64{m.hubbleDistance, m.hubbleTime, m.photons, m.neutrinos, m.e.dark, m.e.curvature} {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, &ParamError{"h0", p.H0, "too far from any universe: the densities that follow are no finite numbers"}
		}
	}
	if u, found := newSigns(&m.e, true).first(0, math.Inf(1)); found {
		return nil, m.noBigBang(u)
	}
	m.classify()
	m.prepareLazily()
	return m, nil
}

// fillDensities derives the densities today from the parameters.
func (m *Model) fillDensities() {
	p, e := &m.params, &m.e
	e.matter, e.power, e.wa3 = p.OmegaM, 3*(1+p.W0+p.Wa), 3*p.Wa
	e.constant = p.W0 == -1 && p.Wa == 0
	if p.TCMB > 0 {
		h := p.H0 * hubbleToSI
		t2 := p.TCMB * p.TCMB
		m.photons = radiationOverCritical * (t2 / h) * (t2 / h)
		m.fillNeutrinos()
	}
	radiation := m.photons + m.neutrinos
	if p.Flat {
		e.dark = 1 - (p.OmegaM + radiation)
	} else {
		e.dark = p.OmegaDE
		e.curvature = (1 - (p.OmegaM + p.OmegaDE)) - radiation
	}
}

// fillNeutrinos shares Neff equally among the species listed.
func (m *Model) fillNeutrinos() {
	masses := slices.Clone(m.params.NeutrinoMasses)
	if len(masses) == 0 {
		masses = make([]float64, 3)
	}
	slices.Sort(masses) // the order of the list means nothing
	each := float64(m.photons * (neutrinosPerPhoton * m.params.Neff / float64(len(masses))))
	kelvin := m.params.TCMB * cubeRootFourElevenths
	massless := 0.0
	last := 0.0
	for _, mass := range masses {
		switch n := len(m.e.massive); {
		case mass == 0 || each == 0:
			massless += each
		case n > 0 && mass == last:
			m.e.massive[n-1].omega += each
		default:
			m.e.massive = append(m.e.massive, species{omega: each, y: mass * electronVoltOverKelvin / kelvin})
			last = mass
		}
	}
	m.e.radiation = m.photons + massless
	m.neutrinos = massless
	for i := range m.e.massive {
		m.neutrinos += m.e.massive[i].density(1)
	}
}

// noBigBang names the parameter to blame for E^2 <= 0 at u = ln(1+z).
func (m *Model) noBigBang(u float64) error {
	param, value := "omega_de", m.e.dark
	switch {
	case m.params.Wa != 0 && m.e.power > 3 && m.e.dark < 0:
		param, value = "wa", m.params.Wa // negative dark energy that outgrows matter
	case m.params.Flat:
		param, value = "omega_m", m.params.OmegaM
	}
	return &ParamError{param, value, fmt.Sprintf("no big bang: with the other densities, H^2 falls to zero or below at z = %.6g", exact.Expm1(u))}
}

// classify finds how the model begins and ends.
func (m *Model) classify() {
	e := &m.e
	lead := newSigns(e, true).lead
	m.aging, m.bounded = lead > 0, lead > 2
	m.turnAround = math.NaN()
	if u, found := newSigns(e, false).first(0, -700); found {
		m.turns = true
		m.startX = m.polishTurn(exact.Exp(u))
		m.turnAround = m.startX - 1
	}
	m.horizon = !m.turns && e.dark > 0 && (e.wa3 > 0 || e.wa3 == 0 && e.power < 2)
}

// polishTurn returns the zero of E^2 next to x.
func (m *Model) polishTurn(x float64) float64 {
	low, high := x*(1-1e-11), min(1, x*(1+1e-11))
	if !(m.e.squared(low) < 0 && m.e.squared(high) > 0) {
		return x // E^2 only touches zero
	}
	for range 60 {
		middle := 0.5 * (low + high)
		if m.e.squared(middle) > 0 {
			high = middle
		} else {
			low = middle
		}
	}
	if math.Abs(m.e.squared(low)) < m.e.squared(high) {
		return low
	}
	return high
}

// prepareLazily sets up what is computed when first asked for.
func (m *Model) prepareLazily() {
	m.special = sync.OnceValue(m.findSpecial)
	m.scalars = sync.OnceValue(m.findPast)
	m.future.grid = sync.OnceValue(m.buildHorizonGrid)
}

// Params returns the parameters the model was made from.
func (m *Model) Params() Params {
	p := m.params
	p.NeutrinoMasses = slices.Clone(p.NeutrinoMasses)
	return p
}

// HubbleDistance returns c/H0 in Mpc (Hogg 1999, eq. 4).
func (m *Model) HubbleDistance() float64 { return m.hubbleDistance }

// HubbleTime returns 1/H0 in Gyr (Hogg 1999, eq. 3).
func (m *Model) HubbleTime() float64 { return m.hubbleTime }

// OmegaM returns the density of baryons and cold dark matter today.
func (m *Model) OmegaM() float64 { return m.e.matter }

// OmegaK returns the density that curvature counts for today: negative in a
// closed model, exactly 0 in a flat one.
func (m *Model) OmegaK() float64 { return m.e.curvature }

// OmegaDE returns the density of dark energy today.
func (m *Model) OmegaDE() float64 { return m.e.dark }

// OmegaPhoton returns the density of the background radiation's photons today.
func (m *Model) OmegaPhoton() float64 { return m.photons }

// OmegaNu returns the density of all neutrinos today, with mass or without.
func (m *Model) OmegaNu() float64 { return m.neutrinos }

// TurnAround returns the redshift in (-1, 0) at which the expansion will stop
// and turn around; false if it never does. Rows at or beyond it have no
// quantities, and such a model has no event horizon.
func (m *Model) TurnAround() (z float64, ok bool) { return m.turnAround, m.turns }
