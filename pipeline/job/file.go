// Package job reads the job file, or the flags that stand for one, fills in
// defaults, validates everything at once, and reduces what is left to
// [Settings]: the canonical form from which the config hash is computed.
//
// [Parse] turns TOML into a [File]; [File.Resolve] turns a File into a [Job].
// Every fault names the key and its line, or the flag.
package job

// A File is the job file as it is written. A nil pointer, an empty string or an
// empty slice means that the key is absent. The toml tags are the public names.
type File struct {
	Title     string      `toml:"title,omitempty"`
	Input     Input       `toml:"input"`
	Columns   Columns     `toml:"columns"`
	Redshift  Redshift    `toml:"redshift,omitempty"`
	Cosmology []Cosmology `toml:"cosmology,omitempty"`
	Band      []Band      `toml:"band,omitempty"`
	Line      []Line      `toml:"line,omitempty"`
	Radio     []Radio     `toml:"radio,omitempty"`
	Size      []Size      `toml:"size,omitempty"`
	Selection []Selection `toml:"selection,omitempty"`
	Cut       []Cut       `toml:"volume_limited,omitempty"`
	Add       Add         `toml:"add"`
	Output    Output      `toml:"output,omitempty"`
	Limits    Limits      `toml:"limits,omitempty"`

	// Name is the job file's path, "" for a job made of flags. Relative paths
	// in the file are relative to its directory.
	Name string `toml:"-"`

	places map[string]string // key path → where it was set, for messages
}

// Input says which files make the units of the job, and how to read them.
type Input struct {
	Files  []string `toml:"files"`            // patterns; ** crosses directories
	Format string   `toml:"format,omitempty"` // where the suffix does not tell
	HDU    any      `toml:"hdu,omitempty"`    // of FITS: the table's number, 0 being the primary header, or its EXTNAME
	CSV    CSV      `toml:"csv,omitempty"`
}

// CSV is the dialect of delimited text.
type CSV struct {
	Delimiter       string   `toml:"delimiter,omitempty"`        // "," by default, a tab for .tsv; never guessed
	Quote           string   `toml:"quote,omitempty"`            // "\"" by default, or "none"
	Comment         string   `toml:"comment,omitempty"`          // start of a line that is no row
	Header          any      `toml:"header,omitempty"`           // true (default), false or "commented"
	HeaderDelimiter string   `toml:"header_delimiter,omitempty"` // where it differs from the records'
	Names           []string `toml:"names,omitempty"`            // where there is no header
}

// Columns says what each quantity is called in the catalogue.
type Columns struct {
	Redshift             string `toml:"redshift,omitempty"`
	RedshiftMissing      []any  `toml:"redshift_missing,omitempty"`
	Velocity             string `toml:"velocity,omitempty"`
	VelocityConvention   string `toml:"velocity_convention,omitempty"` // optical, radio, relativistic
	VelocityUnit         string `toml:"velocity_unit,omitempty"`       // km/s (default) or m/s
	VelocityMissing      []any  `toml:"velocity_missing,omitempty"`
	RedshiftError        string `toml:"redshift_error,omitempty"`
	VelocityError        string `toml:"velocity_error,omitempty"`
	RedshiftLower        string `toml:"redshift_lower,omitempty"`
	RedshiftUpper        string `toml:"redshift_upper,omitempty"`
	RedshiftHeliocentric string `toml:"redshift_heliocentric,omitempty"`
	PeculiarVelocity     string `toml:"peculiar_velocity,omitempty"` // km/s, positive away from us
	RightAscension       string `toml:"right_ascension,omitempty"`
	Declination          string `toml:"declination,omitempty"`
	PositionMissing      []any  `toml:"position_missing,omitempty"`
	EBV                  string `toml:"ebv,omitempty"`
	EBVError             string `toml:"ebv_error,omitempty"`
	Quality              string `toml:"quality,omitempty"`
	ErrorMissing         []any  `toml:"error_missing,omitempty"` // sentinels of the error and quantile columns above
	OtherMissing         []any  `toml:"other_missing,omitempty"` // of peculiar_velocity, redshift_heliocentric and ebv
}

// Redshift says what the redshifts mean and which of them count.
type Redshift struct {
	Frame                 string    `toml:"frame,omitempty"`        // as-given (default), heliocentric, barycentric, cmb, local-group
	DistancesIn           string    `toml:"distances_in,omitempty"` // as-given (default), cmb, local-group
	Valid                 []float64 `toml:"valid,omitempty"`        // [lowest, highest]
	QualityGood           []any     `toml:"quality_good,omitempty"`
	Negative              string    `toml:"negative,omitempty"`                // null (default) or signed
	PeculiarVelocitySigma float64   `toml:"peculiar_velocity_sigma,omitempty"` // km/s
}

// Cosmology is one background model: a named set, or numbers.
type Cosmology struct {
	Set                string    `toml:"set,omitempty"`
	Suffix             string    `toml:"suffix,omitempty"`
	H0                 *float64  `toml:"h0,omitempty"` // km/s/Mpc
	OmegaM             *float64  `toml:"omega_m,omitempty"`
	OmegaDE            *float64  `toml:"omega_de,omitempty"` // absent: flat
	W0                 *float64  `toml:"w0,omitempty"`
	Wa                 *float64  `toml:"wa,omitempty"`
	CMBTemperature     *float64  `toml:"cmb_temperature,omitempty"` // K
	EffectiveNeutrinos *float64  `toml:"effective_neutrinos,omitempty"`
	NeutrinoMasses     []float64 `toml:"neutrino_masses,omitempty"` // eV
}

// Band is one photometric band: its measurement, and the terms of
// M = m - A - mu - K - e.
type Band struct {
	Name            string   `toml:"name"`
	Magnitude       string   `toml:"magnitude,omitempty"`
	Flux            string   `toml:"flux,omitempty"`
	FluxUnit        string   `toml:"flux_unit,omitempty"`  // maggies, nanomaggies, microJy, Jy
	ZeroPoint       *float64 `toml:"zero_point,omitempty"` // instead of flux_unit, mag
	AsinhMagnitude  string   `toml:"asinh_magnitude,omitempty"`
	Softening       float64  `toml:"softening,omitempty"` // b of the asinh magnitude, dimensionless
	MagnitudeOffset float64  `toml:"magnitude_offset,omitempty"`
	MagnitudeError  string   `toml:"magnitude_error,omitempty"`
	FluxError       string   `toml:"flux_error,omitempty"`
	FluxIvar        string   `toml:"flux_ivar,omitempty"`
	Missing         []any    `toml:"missing,omitempty"`

	Extinction      any    `toml:"extinction,omitempty"`       // a coefficient times ebv, or the name of a column in mag
	ExtinctionError string `toml:"extinction_error,omitempty"` // a column, mag

	KCorrection            *KCorrection `toml:"k_correction,omitempty"`
	Evolution              *Evolution   `toml:"evolution,omitempty"`
	SolarAbsoluteMagnitude *float64     `toml:"solar_absolute_magnitude,omitempty"`
}

// KCorrection says where K(z) comes from: exactly one of Column, PowerLaw,
// Table, SED.
type KCorrection struct {
	Column           string   `toml:"column,omitempty"`
	PowerLaw         *float64 `toml:"power_law,omitempty"` // alpha of f_nu ~ nu^alpha
	Table            string   `toml:"table,omitempty"`     // file: z, K or template, z, K
	Template         string   `toml:"template,omitempty"`  // column that names each row's template
	SED              string   `toml:"sed,omitempty"`       // file: wavelength, f_lambda
	Bandpass         string   `toml:"bandpass,omitempty"`  // file: wavelength, response
	BandpassKind     string   `toml:"bandpass_kind,omitempty"`
	WavelengthUnit   string   `toml:"wavelength_unit,omitempty"` // angstrom (default) or nm
	RestBandRedshift float64  `toml:"rest_band_redshift,omitempty"`
	RestBandpass     string   `toml:"rest_bandpass,omitempty"`
	ZeroPointSED     string   `toml:"zero_point_sed,omitempty"`
}

// Evolution is e = -Q (z - z0), in mag: Q > 0 is brighter in the past.
type Evolution struct {
	Q  float64 `toml:"q"`
	Z0 float64 `toml:"z0,omitempty"`
}

// Line is the flux of an emission line, in units of Scale erg/s/cm2.
type Line struct {
	Name      string   `toml:"name"`
	Flux      string   `toml:"flux"`
	FluxError string   `toml:"flux_error,omitempty"`
	Scale     *float64 `toml:"flux_scale,omitempty"` // erg/s/cm2 for one unit of the column; default 1
	Missing   []any    `toml:"missing,omitempty"`
}

// Radio is a flux density at one observed frequency, S ~ nu^alpha.
type Radio struct {
	Name          string  `toml:"name"`
	Flux          string  `toml:"flux"`
	FluxError     string  `toml:"flux_error,omitempty"`
	FluxUnit      string  `toml:"flux_unit,omitempty"` // Jy, mJy (default), microJy
	SpectralIndex float64 `toml:"spectral_index,omitempty"`
	Missing       []any   `toml:"missing,omitempty"`
}

// Size is an angular size in arcsec.
type Size struct {
	Name    string `toml:"name"`
	Angle   string `toml:"angle"`
	Error   string `toml:"angle_error,omitempty"`
	Missing []any  `toml:"missing,omitempty"`
}

// Selection says which objects the survey could have seen.
type Selection struct {
	Name         string             `toml:"name"`
	Band         string             `toml:"band,omitempty"`
	Bands        []Limit            `toml:"limit,omitempty"` // several: their intersection
	Faint        any                `toml:"faint,omitempty"` // a number or a column
	Bright       any                `toml:"bright,omitempty"`
	LimitsOn     string             `toml:"limits_on,omitempty"` // corrected or observed; no default
	Area         any                `toml:"area,omitempty"`      // deg2: a number, or the name of the field column
	FieldAreas   map[string]float64 `toml:"field_areas,omitempty"`
	Redshift     []float64          `toml:"redshift,omitempty"`
	Completeness string             `toml:"completeness,omitempty"`
	KCorrection  *KCorrection       `toml:"k_correction,omitempty"` // instead of the band's
}

// Limit is one band's part of a selection of several bands.
type Limit struct {
	Band        string       `toml:"band"`
	Faint       any          `toml:"faint,omitempty"`
	Bright      any          `toml:"bright,omitempty"`
	KCorrection *KCorrection `toml:"k_correction,omitempty"`
}

// Cut is a volume-limited sample: redshift limits and an absolute magnitude.
type Cut struct {
	Name         string    `toml:"name"`
	Band         string    `toml:"band"`
	BrighterThan *float64  `toml:"brighter_than,omitempty"` // absolute magnitude
	Redshift     []float64 `toml:"redshift"`
}

// Add says which columns to add, and in which units.
type Add struct {
	Columns    []string `toml:"columns"`
	LengthUnit string   `toml:"length_unit,omitempty"` // Mpc (default), Gpc, Glyr, Mpc/h
	Prefix     string   `toml:"prefix,omitempty"`
}

// Output says where the enriched catalogue goes and how it is written.
type Output struct {
	Directory string `toml:"directory,omitempty"`
	File      string `toml:"file,omitempty"` // for a single input
	Format    string `toml:"format,omitempty"`
	Digits    int    `toml:"digits,omitempty"` // of floats in text; 0 is the shortest that reads back the same
	Float     int    `toml:"float,omitempty"`  // 64 (default) or 32
	Encoding  string `toml:"encoding,omitempty"`
	Codec     string `toml:"codec,omitempty"`
	Level     int    `toml:"level,omitempty"`
}

// Limits bounds what a unit may lose.
type Limits struct {
	MaxRejects int64 `toml:"max_rejects,omitempty"`
}
