package columns

import (
	"regexp"
	"slices"
	"strings"
	"testing"

	"catenrich/pipeline/job"
)

// ucdWords are the words of the UCD list 1.6 (IVOA, 2024-12-18) that columns
// use, and where each may stand: first, second (never first) or any. Places
// that the list's own text was not at hand for are from memory.
var ucdWords = map[string]string{
	"src.redshift": "any", "phot.mag": "any", "phot.mag.distMod": "any", "phys.magAbs": "any", "pos.distance": "any", "phys.volume": "any",
	"phys.veloc": "any", "phys.luminosity": "any", "phys.size": "any", "phys.absorption": "any", "time.age": "any", "time.interval": "any",
	"pos.cartesian.x": "any", "pos.cartesian.y": "any", "pos.cartesian.z": "any",
	"stat.error": "first", "stat.weight": "first", "meta.code": "first", "meta.code.qual": "first", "arith.rate": "first",
	"phys.cosmology": "second", "arith.diff": "second", "arith.ratio": "second", "stat.min": "second", "stat.max": "second", "em.line": "second", "em.radio": "second",
}

// checkUCD reports what is wrong with a UCD, or "".
func checkUCD(ucd string) string {
	for i, word := range strings.Split(ucd, ";") {
		switch place := ucdWords[word]; {
		case place == "":
			return word + " is no word of the list"
		case place == "first" && i > 0:
			return word + " must stand first"
		case place == "second" && i == 0:
			return word + " must not stand first"
		}
	}
	return ""
}

var nameForm = regexp.MustCompile(`^[a-z][a-z0-9]*(_[a-z0-9]+)*$`)

func TestRegistry(t *testing.T) {
	names := make(map[string]bool)
	entries := append(All(), Status())
	for i := range entries {
		e := &entries[i]
		if !nameForm.MatchString(e.Name) || names[e.Name] {
			t.Errorf("the name %q is used twice, or is no snake_case", e.Name)
		}
		names[e.Name] = true
		if e.Group == "" || e.Group == e.Name || len(e.Doc) < 10 || len(e.From) < 8 {
			t.Errorf("%s: group %q, doc %q, source %q", e.Name, e.Group, e.Doc, e.From)
		}
		if strings.HasSuffix(e.Doc, ".") || strings.ToLower(e.Doc[:1]) != e.Doc[:1] && !strings.HasPrefix(e.Doc, "K") && !strings.HasPrefix(e.Doc, "V") && !strings.HasPrefix(e.Doc, "Galactic") {
			t.Errorf("%s: the doc is a phrase, not a sentence: %q", e.Name, e.Doc)
		}
		if wrong := checkUCD(e.UCD); wrong != "" {
			t.Errorf("%s: UCD %q: %s", e.Name, e.UCD, wrong)
		}
		if e.Name == StatusName {
			continue
		}
		if (e.Eval == nil) == (e.Test == nil) {
			t.Errorf("%s has both Eval and Test, or neither", e.Name)
		}
		if e.Scope == Once && e.Uses != 0 {
			t.Errorf("%s depends on the model and is not repeated for each", e.Name)
		}
		if slices.Contains(Groups(), e.Name) {
			t.Errorf("%s is a group and a column", e.Name)
		}
	}
}

// TestAddedFields: what files say of the columns, errors included.
func TestAddedFields(t *testing.T) {
	k := New(resolve(t, fullJob))
	seen := make(map[string]bool)
	for _, f := range k.Added() {
		if wrong := checkUCD(f.UCD); wrong != "" {
			t.Errorf("%s: UCD %q: %s", f.Name, f.UCD, wrong)
		}
		if f.Description == "" || f.Source == "" || seen[strings.ToLower(f.Name)] {
			t.Errorf("%s: description %q, source %q, or a name used twice", f.Name, f.Description, f.Source)
		}
		seen[strings.ToLower(f.Name)] = true
	}
	if last := k.Added()[len(k.Added())-1].Name; last != StatusName {
		t.Errorf("the last column is %s", last)
	}
}

// TestVOUnits: VOUnits 1.1 of every unit that follows the job's length unit.
// "Mpc/h" would mean a megaparsec per hour there.
func TestVOUnits(t *testing.T) {
	for _, c := range []struct {
		unit                    Unit
		mpc, gpc, glyr, mpcPerH string
	}{
		{None, "", "", "", ""},
		{Length, "Mpc", "Gpc", "Glyr", "Mpc.'littleh'**-1"},
		{Volume, "Mpc**3", "Gpc**3", "Glyr**3", "Mpc**3.'littleh'**-3"},
		{VolumePerSr, "Mpc**3.sr**-1", "Gpc**3.sr**-1", "Glyr**3.sr**-1", "Mpc**3.'littleh'**-3.sr**-1"},
		{Magnitude, "mag", "mag", "mag", "mag"},
		{Gyr, "Gyr", "Gyr", "Gyr", "Gyr"},
		{Scale, "kpc.arcsec**-1", "kpc.arcsec**-1", "kpc.arcsec**-1", "kpc.'littleh'**-1.arcsec**-1"},
		{Speed, "km.s**-1", "km.s**-1", "km.s**-1", "km.s**-1"},
		{PerYear, "yr**-1", "yr**-1", "yr**-1", "yr**-1"},
		{SpeedDrift, "cm.s**-1.yr**-1", "cm.s**-1.yr**-1", "cm.s**-1.yr**-1", "cm.s**-1.yr**-1"},
	} {
		for length, want := range map[string]string{"Mpc": c.mpc, "Gpc": c.gpc, "Glyr": c.glyr, "Mpc/h": c.mpcPerH} {
			if got := c.unit.VOUnit(length); got != want {
				t.Errorf("unit %d with lengths in %s: %q, want %q", c.unit, length, got, want)
			}
			if note := c.unit.Note(length); (note != "") != (want != c.mpc && length == "Mpc/h" || c.unit == Magnitude && length == "Mpc/h") {
				t.Errorf("unit %d with lengths in %s: note %q", c.unit, length, note)
			}
		}
	}
}

func TestExpand(t *testing.T) {
	s := &job.Settings{}
	for _, c := range []struct{ ask, want, wrong string }{
		{"lookback_time", "lookback_time", ""},
		{"velocity_drift,comoving_distance", "comoving_distance,velocity_drift", ""},
		{"times", "lookback_time,age_at_emission,contact_lost_age", ""},
		{"times,lookback_time", "lookback_time,age_at_emission,contact_lost_age", ""},
		{"volumes", "comoving_volume,comoving_volume_element", ""},
		{"recession", "recession_velocity_now,recession_velocity_at_emission,superluminal_now,superluminal_at_emission,beyond_event_horizon,redshift_drift,velocity_drift", ""},
		{"distances", "comoving_distance,transverse_comoving_distance,angular_diameter_distance,luminosity_distance,emission_distance,distance_modulus,angular_scale,surface_brightness_dimming", ""},
		{"lookback_time,lookback_time", "lookback_time", `names "lookback_time" twice`},
		{"lookback", "", `"lookback", which is no column and no group; the nearest are "lookback_time"`},
		{"Lookback_Time", "", `"Lookback_Time"`},
		{"enrich_status", "", "always added"},
		{"", "", `names ""`},
	} {
		got, wrong := Catalog{}.Expand(s, strings.Split(c.ask, ","))
		text := ""
		for _, err := range wrong {
			text += err.Error()
		}
		if strings.Join(got, ",") != c.want || !strings.Contains(text, c.wrong) || (c.wrong == "") != (text == "") {
			t.Errorf("%q: %v, %q\nwant %s, %q", c.ask, got, text, c.want, c.wrong)
		}
	}
	all, wrong := Catalog{}.Expand(s, []string{"all"})
	if len(wrong) > 0 || len(all) < 20 {
		t.Errorf("all is %v, %v", all, wrong)
	}
}
