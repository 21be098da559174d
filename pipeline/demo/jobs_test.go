package demo

import (
	"math"
	"os"
	"slices"
	"testing"

	"catenrich/cosmo/photo"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// parsed writes the survey and parses one of its job files.
func parsed(t *testing.T, name string) (*job.File, string) {
	t.Helper()
	dir := t.TempDir()
	if _, err := Write(dir, Options{Rows: 2000}); err != nil {
		t.Fatal(err)
	}
	path := join(dir, name)
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	f, err := job.Parse(path, text)
	if err != nil {
		t.Fatal(err)
	}
	return f, dir
}

func TestJob(t *testing.T) {
	f, _ := parsed(t, Job)
	j, err := f.Resolve(columns.Catalog{})
	if err != nil {
		t.Fatal(err)
	}
	if n := len(j.Models); n != 2 {
		t.Errorf("%d cosmologies, want 2", n)
	}
	for _, name := range []string{"luminosity_distance", "age_at_emission", "comoving_volume", "superluminal_now", "velocity_drift"} {
		if !slices.Contains(j.Settings.Added, name) {
			t.Errorf("the job does not add %s: %v", name, j.Settings.Added)
		}
	}
	if broken := int64(4 + 3); j.MaxRejects < broken {
		t.Errorf("max_rejects is %d, and %d records are broken", j.MaxRejects, broken)
	}
	known(t, f)
}

// known fails for each column of the job that the catalogue does not have.
func known(t *testing.T, f *job.File) {
	t.Helper()
	c := &f.Columns
	for _, name := range []string{c.Redshift, c.RedshiftError, c.RedshiftLower, c.RedshiftUpper, c.RightAscension, c.Declination, c.EBV, c.EBVError, c.Quality} {
		if name != "" && !slices.Contains(columnNames[:], name) {
			t.Errorf("the job speaks of a column %q", name)
		}
	}
	for _, b := range f.Band {
		for _, name := range []string{b.Magnitude, b.MagnitudeError, b.Flux, b.FluxIvar, b.KCorrection.Column, b.KCorrection.Template} {
			if name != "" && !slices.Contains(columnNames[:], name) {
				t.Errorf("band %s speaks of a column %q", b.Name, name)
			}
		}
	}
}

// TestPhotometryJob holds that the job says what the simulation did.
func TestPhotometryJob(t *testing.T) {
	f, _ := parsed(t, PhotometryJob)
	known(t, f)
	if len(f.Band) != bands {
		t.Fatalf("%d bands, want %d", len(f.Band), bands)
	}
	for i, b := range f.Band {
		if b.Name != bandNames[i] || b.Extinction != extinctionPerEBV[i] {
			t.Errorf("band %d is %s with extinction %v, simulated was %s with %v", i, b.Name, b.Extinction, bandNames[i], extinctionPerEBV[i])
		}
		if b.Evolution == nil || b.Evolution.Q != evolutionQ || b.Evolution.Z0 != evolutionZero {
			t.Errorf("band %s evolves by %+v, simulated was %v, %v", b.Name, b.Evolution, evolutionQ, evolutionZero)
		}
	}
	if f.Redshift.PeculiarVelocitySigma != velocityDispersion {
		t.Errorf("peculiar_velocity_sigma = %v, simulated was %v", f.Redshift.PeculiarVelocitySigma, velocityDispersion)
	}
	s := f.Selection[0]
	if area, ok := s.Area.(float64); !ok || math.Abs(area-mainField.area()) > 1e-4 {
		t.Errorf("area = %v, the field has %.4f", s.Area, mainField.area())
	}
	if faint, ok := s.Faint.(float64); !ok || faint > FluxLimit-0.2 || s.Redshift[0] <= nearLow || s.Redshift[1] >= nearHigh {
		t.Errorf("the selection %+v is not well inside the survey's limits", s)
	}
}

// TestSideFiles reads the files as the job would, and gets the corrections that
// the simulation applied.
func TestSideFiles(t *testing.T) {
	_, dir := parsed(t, PhotometryJob)
	read := func(name string) []byte {
		content, err := os.ReadFile(join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		return content
	}
	set, err := photo.ParseTable(KTable, read(KTable), true)
	if err != nil {
		t.Fatal(err)
	}
	spectrum, err := photo.ParseSpectrum(SED, read(SED), photo.Angstrom)
	if err != nil {
		t.Fatal(err)
	}
	band, err := photo.ParseBandpass(Bandpass, read(Bandpass), photo.Angstrom, false)
	if err != nil {
		t.Fatal(err)
	}
	k, err := photo.NewSynthetic(photo.Synthesis{SED: spectrum, Band: band})
	if err != nil {
		t.Fatal(err)
	}
	low, high := k.Range()
	if low > 0 || high < 4.5 || high > 5 {
		t.Errorf("the spectrum covers the band from z = %.2f to %.2f, want 0 to about 4.7", low, high)
	}
	for _, r := range survey20k(t).rows {
		z := r.fact("z_hel")
		if r.true["kind"] == "star" || !(z > 0) {
			continue
		}
		i := slices.Index(set.Names, r.true["template"])
		if i < 0 {
			t.Fatalf("no K table for template %q", r.true["template"])
		}
		// Both interpolate: 5e-6 mag at most for the steps of the table.
		if got := set.Each[i].Value(z); !(math.Abs(got-r.fact("k_r")) < 1e-5) {
			t.Fatalf("%s at z = %g: K = %.6f in r from the table, simulated was %.6f", r.true["template"], z, got, r.fact("k_r"))
		}
		// Sampled at 10 Angstrom, at 1200 the spectrum is right to 3e-5.
		if got := k.Value(z); z < high && !(math.Abs(got-r.fact("k_i")) < 2e-4) {
			t.Fatalf("z = %g: K = %.6f in i from the files, simulated was %.6f", z, got, r.fact("k_i"))
		}
	}
}
