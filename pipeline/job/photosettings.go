package job

// BandRole is the role of a column of a band: band.r.value.
func BandRole(band, what string) Role { return Role("band." + band + "." + what) }

// SelectionRole is the role of a column of a selection: selection.main.area.
func SelectionRole(name, what string) Role { return Role("selection." + name + "." + what) }

// LimitRole is the role of a column that holds a selection's limit in a band.
func LimitRole(name, band, what string) Role { return SelectionRole(name, band+"."+what) }

// OtherRole is the role of a column of a line, a radio source or a size.
func OtherRole(kind, name, what string) Role { return Role(kind + "." + name + "." + what) }

// What the columns of bands, lines, radio sources, sizes and selections are.
const (
	PartValue           = "value" // the magnitude, flux or angle
	PartError           = "error" // its error, or the inverse variance of a flux
	PartExtinction      = "extinction"
	PartExtinctionError = "extinction_error"
	PartK               = "k_correction"
	PartTemplate        = "template"
	PartFaint           = "faint"
	PartBright          = "bright"
	PartField           = "field" // names the field, which has an area
	PartCompleteness    = "completeness"
)

// BandSettings is one photometric band.
type BandSettings struct {
	Name       string  `json:"name"`
	Measure    string  `json:"measure"`    // magnitude, flux or asinh
	ZeroPoint  float64 `json:"zeroPoint"`  // mag of unit flux
	Offset     float64 `json:"offset"`     // mag
	Softening  float64 `json:"softening"`  // of asinh magnitudes, maggies
	ErrorKind  string  `json:"errorKind"`  // "", magnitude, flux or ivar
	Extinction string  `json:"extinction"` // "", column or coefficient
	PerEBV     float64 `json:"perEBV"`     // the coefficient

	K   KSettings `json:"k"`
	Q   float64   `json:"q"`   // evolution, mag per unit redshift
	Z0  float64   `json:"z0"`  // where the evolution is zero
	Sun *float64  `json:"sun"` // the Sun's absolute magnitude; null: no luminosities
}

// KSettings is where a K-correction comes from.
type KSettings struct {
	Kind           string            `json:"kind"` // none, column, power_law, table or sed
	Alpha          float64           `json:"alpha"`
	RestRedshift   float64           `json:"restRedshift"`
	BandpassKind   string            `json:"bandpassKind"`   // "", photon or energy
	WavelengthUnit string            `json:"wavelengthUnit"` // "", angstrom or nm
	Files          map[string]string `json:"files"`          // SHA-256 by use: sed, bandpass, rest_bandpass, zero_point_sed, table
}

// LineSettings is an emission line.
type LineSettings struct {
	Name  string  `json:"name"`
	Scale float64 `json:"scale"` // erg/s/cm2 in one unit of the column
}

// RadioSettings is a radio flux density.
type RadioSettings struct {
	Name  string  `json:"name"`
	Alpha float64 `json:"alpha"`
	Scale float64 `json:"scale"` // Jy in one unit of the column
}

// SizeSettings is an angular size in arcsec.
type SizeSettings struct {
	Name string `json:"name"`
}

// SelectionSettings is one selection.
type SelectionSettings struct {
	Name       string             `json:"name"`
	Limits     []LimitSettings    `json:"limits"`
	Corrected  bool               `json:"corrected"` // limits are on m - A
	Area       float64            `json:"area"`      // deg2; 0 where fields have their own
	FieldAreas map[string]float64 `json:"fieldAreas"`
	Redshift   Numbers            `json:"redshift"` // [lowest, highest]
}

// LimitSettings is one band's part of a selection; null: no such limit, or one
// from a column.
type LimitSettings struct {
	Band   string     `json:"band"`
	Faint  *float64   `json:"faint"`
	Bright *float64   `json:"bright"`
	K      *KSettings `json:"k"` // null: the band's
}

// CutSettings is a volume-limited sample.
type CutSettings struct {
	Name         string  `json:"name"`
	Band         string  `json:"band"`
	BrighterThan float64 `json:"brighterThan"`
	Redshift     Numbers `json:"redshift"`
}
