package job

import (
	"errors"
	"fmt"

	"catenrich/cosmo"
	"catenrich/internal/table"
)

// DefaultSet is the cosmology of a job that names none.
const DefaultSet = "planck2018"

// standardNeff is the effective number of neutrinos where a temperature is
// given without one (three species, slightly heated by electron-positron
// annihilation: Mangano et al. 2005, from memory).
const standardNeff = 3.046

// cosmologies resolves every [[cosmology]] into numbers and a model.
func (r *resolver) cosmologies(s *Settings) {
	list := r.file.Cosmology
	if len(list) == 0 {
		list = []Cosmology{{Set: DefaultSet}}
	}
	suffixes := make(map[string]bool)
	for i := range list {
		path := fmt.Sprintf("cosmology[%d]", i)
		c := &list[i]
		switch {
		case i > 0 && c.Suffix == "":
			r.fail(path+".suffix", "is not set: only the first cosmology goes without a suffix for its columns")
		case suffixes[c.Suffix]:
			r.fail(path+".suffix", "%q is used twice", c.Suffix)
		}
		suffixes[c.Suffix] = true
		settings := r.cosmology(path, c)
		r.model(path, &settings)
		s.Cosmologies = append(s.Cosmologies, settings)
	}
}

// cosmology turns one [[cosmology]] into numbers.
func (r *resolver) cosmology(path string, c *Cosmology) ModelSettings {
	if c.Set != "" {
		return r.set(path, c)
	}
	for _, need := range []struct {
		key   string
		value *float64
	}{{"h0", c.H0}, {"omega_m", c.OmegaM}} {
		if need.value == nil {
			r.fail(path+"."+need.key, "is not set: give h0 and omega_m, or name a set (%s)", table.Quote(setNames()))
		}
	}
	m := ModelSettings{
		Suffix: c.Suffix, H0: value(c.H0, 1), OmegaM: value(c.OmegaM, 0.3), W0: value(c.W0, -1), Wa: value(c.Wa, 0),
		Flat: c.OmegaDE == nil, OmegaDE: value(c.OmegaDE, 0), CMBTemperature: value(c.CMBTemperature, 0),
		EffectiveNeutrinos: value(c.EffectiveNeutrinos, 0), NeutrinoMasses: Numbers(c.NeutrinoMasses),
	}
	if c.EffectiveNeutrinos == nil && m.CMBTemperature > 0 {
		m.EffectiveNeutrinos = standardNeff
	}
	return m
}

// set looks up a named set; numbers beside it would be ambiguous.
func (r *resolver) set(path string, c *Cosmology) ModelSettings {
	preset, ok := cosmo.FindPreset(c.Set)
	if !ok {
		r.fail(path+".set", "is %q, want one of %s", c.Set, table.Quote(setNames()))
		preset, _ = cosmo.FindPreset(DefaultSet)
	}
	if c.H0 != nil || c.OmegaM != nil || c.OmegaDE != nil || c.W0 != nil || c.Wa != nil ||
		c.CMBTemperature != nil || c.EffectiveNeutrinos != nil || c.NeutrinoMasses != nil {
		r.fail(path+".set", "names a set, so its numbers cannot be given as well")
	}
	p := preset.Params
	return ModelSettings{
		Suffix: c.Suffix, H0: p.H0, OmegaM: p.OmegaM, OmegaDE: p.OmegaDE, Flat: p.Flat, W0: p.W0, Wa: p.Wa,
		CMBTemperature: p.TCMB, EffectiveNeutrinos: p.Neff, NeutrinoMasses: Numbers(p.NeutrinoMasses),
	}
}

// model builds the model, or fails with what cosmo refuses, and settles what
// the settings leave open: the dark energy of a flat model, and neutrinos that
// a model without radiation does not have.
func (r *resolver) model(path string, m *ModelSettings) {
	model, err := cosmo.New(m.Params())
	if err != nil {
		r.refused = true
		for _, err := range flatten(err) {
			key, reason := "", err.Error()
			if refusal := new(cosmo.ParamError); errors.As(err, &refusal) {
				key, reason = "."+refusal.Param, fmt.Sprintf("is %v: %s", refusal.Value, refusal.Reason)
			}
			r.fail(path+key, "%s", reason)
		}
		return
	}
	r.job.Models = append(r.job.Models, model)
	m.OmegaDE = model.OmegaDE()
	if m.CMBTemperature == 0 {
		m.EffectiveNeutrinos, m.NeutrinoMasses = 0, nil
	}
	if m.CMBTemperature > 0 && len(m.NeutrinoMasses) == 0 {
		m.NeutrinoMasses = Numbers{0, 0, 0}
	}
	if m.NeutrinoMasses == nil {
		m.NeutrinoMasses = Numbers{}
	}
	for _, v := range []*float64{&m.H0, &m.OmegaM, &m.OmegaDE, &m.W0, &m.Wa} {
		*v += 0 // -0 becomes 0
	}
}

// flatten undoes errors.Join.
func flatten(err error) []error {
	if joined, ok := err.(interface{ Unwrap() []error }); ok {
		return joined.Unwrap()
	}
	return []error{err}
}

func setNames() []string {
	var names []string
	for _, p := range cosmo.Presets() {
		names = append(names, p.Name)
	}
	return names
}

// value returns *p, or fallback where the key is absent.
func value(p *float64, fallback float64) float64 {
	if p == nil {
		return fallback
	}
	return *p
}
