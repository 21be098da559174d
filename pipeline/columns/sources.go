package columns

import (
	"fmt"
	"strings"

	"catenrich/pipeline/job"
)

// Sources says, a line a band and one for the redshifts, which term of the
// columns comes from where.
func (k *Kernel) Sources() []string {
	lines := []string{k.redshiftSource()}
	for i := range k.job.Bands {
		if k.bandTerms[i] != 0 {
			lines = append(lines, k.bandSource(&k.job.Bands[i]))
		}
	}
	return lines
}

// Warnings says what absolute magnitudes leave out.
func (k *Kernel) Warnings() []string {
	var list []string
	for i := range k.job.Bands {
		b, terms := &k.job.Bands[i], k.bandTerms[i]
		if terms&kTerm != 0 && b.BandSettings.K.Kind == "none" {
			list = append(list, fmt.Sprintf("no K-correction for band %s: magnitudes stay in the band as observed", b.Name))
		}
		if terms&extinctionTerm != 0 && b.Extinction == "" {
			list = append(list, fmt.Sprintf("no extinction for band %s: magnitudes are dimmed by the Galaxy's dust", b.Name))
		}
	}
	s := &k.job.Settings.Redshift
	if s.Frame == "heliocentric" && s.DistancesIn == "as-given" {
		list = append(list, "distances are computed from heliocentric redshifts: the Sun's motion is left in (up to 370 km/s; redshift.distances_in = \"cmb\" takes it out)")
	}
	return list
}

func (k *Kernel) redshiftSource() string {
	s := &k.job.Settings
	var b strings.Builder
	if column, ok := s.Catalogue[job.RoleVelocity]; ok {
		fmt.Fprintf(&b, "redshift: from the velocity %s, %s convention", column, s.Redshift.Convention)
	} else {
		fmt.Fprintf(&b, "redshift: %s", s.Catalogue[job.RoleRedshift])
	}
	fmt.Fprintf(&b, ", %s", s.Redshift.Frame)
	if s.Redshift.DistancesIn != "as-given" {
		fmt.Fprintf(&b, "; distances in the %s frame", s.Redshift.DistancesIn)
	}
	if column, ok := s.Catalogue[job.RolePeculiarVelocity]; ok {
		fmt.Fprintf(&b, "; peculiar velocity %s taken out", column)
	}
	if column, ok := s.Catalogue[job.RoleRedshiftHeliocentric]; ok {
		fmt.Fprintf(&b, "; as observed: %s", column)
	}
	return b.String()
}

// bandSource is M = m - A - mu - K - e with the origin of each term.
func (k *Kernel) bandSource(b *job.BandPlan) string {
	from := func(part string) string { return k.job.Settings.Catalogue[job.BandRole(b.Name, part)] }
	extinction := map[string]string{
		"": "none", "column": from(job.PartExtinction),
		"coefficient": fmt.Sprintf("%g x %s", b.PerEBV, k.job.Settings.Catalogue[job.RoleEBV]),
	}[b.Extinction]
	evolution := "none"
	if b.Q != 0 {
		evolution = fmt.Sprintf("-%g (z - %g)", b.Q, b.Z0)
	}
	return fmt.Sprintf("band %s: m = %s (%s); A = %s; K = %s; e = %s", b.Name, from(job.PartValue), b.Measure, extinction, kSource(b, from), evolution)
}

func kSource(b *job.BandPlan, from func(string) string) string {
	switch s := &b.BandSettings.K; s.Kind {
	case "column":
		return from(job.PartK)
	case "power_law":
		return fmt.Sprintf("power law, alpha %g", s.Alpha)
	case "table":
		if template := from(job.PartTemplate); template != "" {
			return "table, by " + template
		}
		return "table"
	case "sed":
		return "synthetic, from an SED and a bandpass"
	}
	return "none"
}
