package job

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"sort"

	"catenrich/cosmo/photo"
)

// A BandPlan is a band ready to be computed.
type BandPlan struct {
	BandSettings
	Photometer photo.Photometer
	Spread     photo.Spread
	K          *photo.Set // nil where K is a column
	Evolution  photo.Evolution
}

// nameForm is what a band, selection or the like may be called: its name
// becomes part of column names.
var nameForm = regexp.MustCompile(`^[A-Za-z0-9_]+$`)

// named checks the name of the ith thing of a kind.
func (r *resolver) named(path, name string, seen map[string]bool) {
	switch {
	case !nameForm.MatchString(name):
		r.fail(path+".name", "is %q, want letters, digits and underscores", name)
	case seen[name]:
		r.fail(path+".name", "%q is used twice", name)
	}
	seen[name] = true
}

// role records that a column of the catalogue plays a role, with its sentinels.
func (r *resolver) role(role Role, path, column string, missing Numbers) {
	if column == "" {
		return
	}
	r.job.Settings.Catalogue[role] = column
	r.job.paths[role] = path
	if len(missing) > 0 {
		r.job.Settings.Missing[role] = missing
	}
}

// bands resolves every [[band]].
func (r *resolver) bands(s *Settings) {
	seen := make(map[string]bool)
	for i := range r.file.Band {
		path := fmt.Sprintf("band[%d]", i)
		b := &r.file.Band[i]
		r.named(path, b.Name, seen)
		r.job.Bands = append(r.job.Bands, r.band(path, b))
	}
	sort.SliceStable(r.job.Bands, func(i, j int) bool { return r.job.Bands[i].Name < r.job.Bands[j].Name })
	s.Bands = []BandSettings{}
	for i := range r.job.Bands {
		s.Bands = append(s.Bands, r.job.Bands[i].BandSettings)
	}
}

func (r *resolver) band(path string, b *Band) BandPlan {
	p := BandPlan{}
	p.Name, p.Offset, p.Sun = b.Name, r.finite(path+".magnitude_offset", b.MagnitudeOffset), b.SolarAbsoluteMagnitude
	missing := r.numbers(path+".missing", b.Missing)
	r.measure(path, b, &p, missing)
	r.bandError(path, b, &p, missing)
	r.extinction(path, b, &p, missing)
	if b.KCorrection != nil {
		p.K = r.kCorrection(path+".k_correction", b.KCorrection, &p.BandSettings.K)
		r.role(BandRole(b.Name, PartK), path+".k_correction.column", b.KCorrection.Column, missing)
		r.role(BandRole(b.Name, PartTemplate), path+".k_correction.template", b.KCorrection.Template, nil)
	} else {
		p.BandSettings.K = KSettings{Kind: "none", Files: map[string]string{}}
		p.K = photo.Single(photo.None{})
	}
	if b.Evolution != nil {
		p.Q, p.Z0 = r.finite(path+".evolution.q", b.Evolution.Q), r.finite(path+".evolution.z0", b.Evolution.Z0)
		p.Evolution = photo.Evolution{Q: p.Q, Z0: p.Z0}
	}
	if p.Sun != nil {
		r.finite(path+".solar_absolute_magnitude", *p.Sun)
	}
	return p
}

// measure resolves what the band's column holds.
func (r *resolver) measure(path string, b *Band, p *BandPlan, missing Numbers) {
	given := 0
	for _, m := range []struct {
		key, column string
		measure     photo.Measure
	}{{"magnitude", b.Magnitude, photo.Magnitude}, {"flux", b.Flux, photo.Flux}, {"asinh_magnitude", b.AsinhMagnitude, photo.Asinh}} {
		if m.column == "" {
			continue
		}
		given++
		p.Photometer.Measure = m.measure
		p.Measure = map[photo.Measure]string{photo.Magnitude: "magnitude", photo.Flux: "flux", photo.Asinh: "asinh"}[m.measure]
		r.role(BandRole(b.Name, PartValue), path+"."+m.key, m.column, missing)
	}
	if given != 1 {
		r.fail(path+".magnitude", "is not set: a band has exactly one of magnitude, flux and asinh_magnitude, and here are %d", given)
		return
	}
	if p.Photometer.Measure == photo.Flux {
		p.ZeroPoint = r.zeroPoint(path, b)
	}
	p.Softening = b.Softening
	p.Photometer.Offset, p.Photometer.ZeroPoint, p.Photometer.Softening = p.Offset, p.ZeroPoint, p.Softening
	if p.Photometer.Measure == photo.Asinh && !(b.Softening > 0) {
		r.fail(path+".softening", "is %v: an asinh magnitude needs its softening, a positive number of maggies", b.Softening)
	}
}

// zeroPoint is the magnitude of unit flux.
func (r *resolver) zeroPoint(path string, b *Band) float64 {
	switch {
	case b.ZeroPoint != nil && b.FluxUnit != "":
		r.fail(path+".zero_point", "and flux_unit exclude each other")
	case b.ZeroPoint != nil:
		return r.finite(path+".zero_point", *b.ZeroPoint)
	}
	zero, ok := photo.ZeroPoint(b.FluxUnit)
	if !ok {
		r.fail(path+".flux_unit", "is %q, want maggies, nanomaggies, microJy or Jy, or give zero_point in its place", b.FluxUnit)
	}
	return zero
}

func (r *resolver) bandError(path string, b *Band, p *BandPlan, missing Numbers) {
	given := 0
	for _, e := range []struct {
		key, column, kind string
		spread            photo.Spread
	}{{"magnitude_error", b.MagnitudeError, "magnitude", photo.MagnitudeError}, {"flux_error", b.FluxError, "flux", photo.FluxError}, {"flux_ivar", b.FluxIvar, "ivar", photo.FluxIvar}} {
		if e.column == "" {
			continue
		}
		given++
		p.ErrorKind, p.Spread = e.kind, e.spread
		r.role(BandRole(b.Name, PartError), path+"."+e.key, e.column, missing)
		if e.spread != photo.MagnitudeError && p.Photometer.Measure != photo.Flux {
			r.fail(path+"."+e.key, "is set, but the band holds magnitudes: give magnitude_error")
		}
	}
	if given > 1 {
		r.fail(path+".magnitude_error", "is one of %d errors: give one of magnitude_error, flux_error and flux_ivar", given)
	}
}

func (r *resolver) extinction(path string, b *Band, p *BandPlan, missing Numbers) {
	switch v := b.Extinction.(type) {
	case nil:
		if b.ExtinctionError != "" {
			r.fail(path+".extinction_error", "is set, but extinction is not")
		}
		return
	case string:
		p.Extinction = "column"
		r.role(BandRole(b.Name, PartExtinction), path+".extinction", v, missing)
		r.role(BandRole(b.Name, PartExtinctionError), path+".extinction_error", b.ExtinctionError, missing)
		return
	default:
		coefficient, ok := asNumber(v)
		if !ok || coefficient < 0 {
			r.fail(path+".extinction", "is %v, want a coefficient that multiplies ebv, or the name of a column", v)
		}
		p.Extinction, p.PerEBV = "coefficient", r.finite(path+".extinction", coefficient)
		if r.file.Columns.EBV == "" {
			r.fail(path+".extinction", "is a coefficient, which multiplies E(B-V), but columns.ebv is not set")
		}
		r.role(BandRole(b.Name, PartExtinctionError), path+".extinction_error", b.ExtinctionError, missing)
	}
}

// kCorrection resolves one k_correction table; nil for a column.
func (r *resolver) kCorrection(path string, k *KCorrection, s *KSettings) *photo.Set {
	s.Files = map[string]string{}
	s.RestRedshift = r.finite(path+".rest_band_redshift", k.RestBandRedshift)
	kinds := []string{}
	for kind, set := range map[string]bool{"column": k.Column != "", "power_law": k.PowerLaw != nil, "table": k.Table != "", "sed": k.SED != ""} {
		if set {
			kinds = append(kinds, kind)
		}
	}
	sort.Strings(kinds)
	if len(kinds) != 1 {
		r.fail(path, "has %d of column, power_law, table and sed, want one", len(kinds))
		return nil
	}
	s.Kind = kinds[0]
	r.kExtras(path, k, s.Kind)
	switch s.Kind {
	case "power_law":
		s.Alpha = r.finite(path+".power_law", *k.PowerLaw)
		return photo.Single(photo.PowerLaw{Alpha: s.Alpha, Rest: s.RestRedshift})
	case "table":
		text := r.sideFile(path+".table", "table", k.Table, s)
		if text == nil {
			return nil
		}
		set, err := photo.ParseTable(k.Table, text, k.Template != "")
		return pass(r, path+".table", set, err)
	case "sed":
		return r.synthetic(path, k, s)
	}
	return nil
}

// kExtras refuses keys that have no meaning for the kind of K-correction.
func (r *resolver) kExtras(path string, k *KCorrection, kind string) {
	for key, set := range map[string]bool{
		"bandpass": k.Bandpass != "", "bandpass_kind": k.BandpassKind != "", "wavelength_unit": k.WavelengthUnit != "",
		"rest_bandpass": k.RestBandpass != "", "zero_point_sed": k.ZeroPointSED != "",
	} {
		if set && kind != "sed" {
			r.fail(path+"."+key, "goes with sed, not with %s", kind)
		}
	}
	if k.Template != "" && kind != "table" {
		r.fail(path+".template", "goes with table, not with %s", kind)
	}
	if k.RestBandRedshift != 0 && kind != "sed" && kind != "power_law" {
		r.fail(path+".rest_band_redshift", "goes with sed or power_law, not with %s", kind)
	}
}

// synthetic makes a K-correction from an SED and a bandpass.
func (r *resolver) synthetic(path string, k *KCorrection, s *KSettings) *photo.Set {
	if k.Bandpass == "" {
		r.fail(path+".bandpass", "is not set: a synthetic K-correction needs an SED and a bandpass")
		return nil
	}
	s.BandpassKind = r.choice(path+".bandpass_kind", k.BandpassKind, "photon", "photon", "energy")
	s.WavelengthUnit = r.choice(path+".wavelength_unit", k.WavelengthUnit, "angstrom", "angstrom", "nm")
	unit := map[string]photo.WavelengthUnit{"angstrom": photo.Angstrom, "nm": photo.Nanometre}[s.WavelengthUnit]
	spectrum := func(key, file string) *photo.Spectrum {
		text := r.sideFile(path+"."+key, key, file, s)
		if text == nil {
			return nil
		}
		v, err := photo.ParseSpectrum(file, text, unit)
		return pass(r, path+"."+key, v, err)
	}
	bandpass := func(key, file string) *photo.Bandpass {
		text := r.sideFile(path+"."+key, key, file, s)
		if text == nil {
			return nil
		}
		v, err := photo.ParseBandpass(file, text, unit, s.BandpassKind == "energy")
		return pass(r, path+"."+key, v, err)
	}
	synthesis := photo.Synthesis{
		SED: spectrum("sed", k.SED), Band: bandpass("bandpass", k.Bandpass), RestBand: bandpass("rest_bandpass", k.RestBandpass),
		RestRedshift: s.RestRedshift, ZeroPoint: spectrum("zero_point_sed", k.ZeroPointSED),
	}
	if synthesis.SED == nil || synthesis.Band == nil {
		return nil
	}
	made, err := photo.NewSynthetic(synthesis)
	if pass(r, path+".sed", made, err) == nil {
		return nil
	}
	return photo.Single(made)
}

// pass records an error of the setting at path; the value is then nil.
func pass[T any](r *resolver, path string, v *T, err error) *T {
	if err != nil {
		r.refused = true
		r.fail(path, "%v", err)
		return nil
	}
	return v
}

// maxSideFile bounds an SED, bandpass or K table.
const maxSideFile = 64 << 20

// sideFile reads a file that the job names, and records its digest; nil if
// there is none, or after an error.
func (r *resolver) sideFile(path, use, name string, s *KSettings) []byte {
	if name == "" {
		return nil
	}
	if r.find != nil {
		text := r.find(name)
		if s.Files[use] = name; text == nil {
			r.lost = append(r.lost, LostFile{path, use, name})
		}
		return text
	}
	full := name
	if !filepath.IsAbs(full) {
		full = filepath.Join(r.job.Base, full)
	}
	info, err := os.Stat(full)
	if err == nil && info.Size() > maxSideFile {
		err = fmt.Errorf("it has %d bytes, at most %d are read", info.Size(), maxSideFile)
	}
	var text []byte
	if err == nil {
		text, err = readAtMost(full, maxSideFile)
	}
	if err != nil {
		r.refused = true
		r.fail(path, "names %s, which cannot be read: %v", name, err)
		return nil
	}
	sum := sha256.Sum256(text)
	s.Files[use] = hex.EncodeToString(sum[:])
	return text
}
