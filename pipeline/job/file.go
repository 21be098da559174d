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
	Title     string      `toml:"title,omitempty"` // for people: in the plan and the report; no output depends on it
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
	Files  []string `toml:"files"`            // patterns, relative to the job file; ** crosses directories
	Format string   `toml:"format,omitempty"` // csv, parquet or fits, where the suffix does not tell
	HDU    any      `toml:"hdu,omitempty"`    // FITS: number of the table (0 is the primary header) or its EXTNAME; absent: the first table
	CSV    CSV      `toml:"csv,omitempty"`
}

// CSV is the dialect of delimited text.
type CSV struct {
	Delimiter       string   `toml:"delimiter,omitempty"`        // "," (default), a tab for .tsv, ";", "|" or " " (space-aligned); never guessed
	Quote           string   `toml:"quote,omitempty"`            // the double quote (default), or none
	Comment         string   `toml:"comment,omitempty"`          // start of a line that is no row
	Header          any      `toml:"header,omitempty"`           // true (default), false or commented
	HeaderDelimiter string   `toml:"header_delimiter,omitempty"` // delimiter of the header, where it differs from the records'
	Names           []string `toml:"names,omitempty"`            // column names, where there is no header
}

// Columns says what each quantity is called in the catalogue.
type Columns struct {
	Redshift             string `toml:"redshift,omitempty"`              // the redshift; a job has this or velocity
	RedshiftMissing      []any  `toml:"redshift_missing,omitempty"`      // values that mean a missing redshift, such as -99; empty, null and NaN always do
	Velocity             string `toml:"velocity,omitempty"`              // a velocity, instead of a redshift
	VelocityConvention   string `toml:"velocity_convention,omitempty"`   // optical, radio, relativistic
	VelocityUnit         string `toml:"velocity_unit,omitempty"`         // km/s (default) or m/s
	VelocityMissing      []any  `toml:"velocity_missing,omitempty"`      // values that mean a missing velocity
	RedshiftError        string `toml:"redshift_error,omitempty"`        // standard error of the redshift
	VelocityError        string `toml:"velocity_error,omitempty"`        // standard error of the velocity, in its unit
	RedshiftLower        string `toml:"redshift_lower,omitempty"`        // lower quantile of the redshift, for columns that end in _lo and _hi
	RedshiftUpper        string `toml:"redshift_upper,omitempty"`        // upper quantile of the redshift
	RedshiftHeliocentric string `toml:"redshift_heliocentric,omitempty"` // the redshift as observed at the Sun, where redshift is in another frame
	PeculiarVelocity     string `toml:"peculiar_velocity,omitempty"`     // km/s, positive away from us
	RightAscension       string `toml:"right_ascension,omitempty"`       // degrees, or sexagesimal hours
	Declination          string `toml:"declination,omitempty"`           // degrees, or sexagesimal
	PositionMissing      []any  `toml:"position_missing,omitempty"`      // values that mean a missing position; none by default
	EBV                  string `toml:"ebv,omitempty"`                   // E(B-V), mag, which the extinction coefficients of bands multiply
	EBVError             string `toml:"ebv_error,omitempty"`             // standard error of ebv, mag
	Quality              string `toml:"quality,omitempty"`               // the survey's own quality mark of the redshift
	ErrorMissing         []any  `toml:"error_missing,omitempty"`         // values that mean a missing error or quantile, in the columns above
	OtherMissing         []any  `toml:"other_missing,omitempty"`         // the same for peculiar_velocity, redshift_heliocentric and ebv
}

// Redshift says what the redshifts mean and which of them count.
type Redshift struct {
	Frame                 string    `toml:"frame,omitempty"`                   // as-given (default), heliocentric, barycentric, cmb, local-group
	DistancesIn           string    `toml:"distances_in,omitempty"`            // as-given (default), cmb, local-group
	Valid                 []float64 `toml:"valid,omitempty"`                   // [lowest, highest] redshift to believe; others get bit 16
	QualityGood           []any     `toml:"quality_good,omitempty"`            // marks of usable redshifts, numbers or texts; other rows get bit 4096
	Negative              string    `toml:"negative,omitempty"`                // null (default) or signed: what rows of z < 0 get
	PeculiarVelocitySigma float64   `toml:"peculiar_velocity_sigma,omitempty"` // km/s, spread of unknown peculiar velocities; a floor of the errors
}

// Cosmology is one background model: a named set, or numbers.
type Cosmology struct {
	Set                string    `toml:"set,omitempty"`                 // planck2018 (default), planck2015, wmap9 or seventy-thirty, instead of numbers
	Suffix             string    `toml:"suffix,omitempty"`              // ends the names of the columns of this cosmology; the first may go without
	H0                 *float64  `toml:"h0,omitempty"`                  // Hubble constant, km/s/Mpc
	OmegaM             *float64  `toml:"omega_m,omitempty"`             // matter density today, without neutrinos
	OmegaDE            *float64  `toml:"omega_de,omitempty"`            // dark-energy density today; absent: flat
	W0                 *float64  `toml:"w0,omitempty"`                  // dark-energy equation of state today, default -1
	Wa                 *float64  `toml:"wa,omitempty"`                  // its change with the scale factor, w = w0 + wa (1 - a), default 0
	CMBTemperature     *float64  `toml:"cmb_temperature,omitempty"`     // K; default 0: no radiation and no neutrinos
	EffectiveNeutrinos *float64  `toml:"effective_neutrinos,omitempty"` // N_eff, default 3.046 where there is a temperature
	NeutrinoMasses     []float64 `toml:"neutrino_masses,omitempty"`     // eV, one for each kind; default three massless
}

// Band is one photometric band: its measurement, and the terms of
// M = m - A - mu - K - e.
type Band struct {
	Name            string   `toml:"name"`                       // ends the names of its columns, as in absolute_magnitude_r
	Magnitude       string   `toml:"magnitude,omitempty"`        // column, mag; a band has one of magnitude, flux and asinh_magnitude
	Flux            string   `toml:"flux,omitempty"`             // column, in flux_unit or by zero_point
	FluxUnit        string   `toml:"flux_unit,omitempty"`        // maggies, nanomaggies, microJy, Jy
	ZeroPoint       *float64 `toml:"zero_point,omitempty"`       // instead of flux_unit, mag
	AsinhMagnitude  string   `toml:"asinh_magnitude,omitempty"`  // column, mag, with its softening
	Softening       float64  `toml:"softening,omitempty"`        // b of the asinh magnitude, dimensionless
	MagnitudeOffset float64  `toml:"magnitude_offset,omitempty"` // mag, added to the magnitude: from Vega to AB, for instance
	MagnitudeError  string   `toml:"magnitude_error,omitempty"`  // column, mag
	FluxError       string   `toml:"flux_error,omitempty"`       // column, in the unit of the flux
	FluxIvar        string   `toml:"flux_ivar,omitempty"`        // column, inverse variance of the flux; 0 is missing
	Missing         []any    `toml:"missing,omitempty"`          // values that mean a missing magnitude or flux

	Extinction      any    `toml:"extinction,omitempty"`       // a coefficient times ebv, or the name of a column in mag
	ExtinctionError string `toml:"extinction_error,omitempty"` // a column, mag

	KCorrection            *KCorrection `toml:"k_correction,omitempty"`             // K, where there is one; see [band.k_correction]
	Evolution              *Evolution   `toml:"evolution,omitempty"`                // e, where there is one; see [band.evolution]
	SolarAbsoluteMagnitude *float64     `toml:"solar_absolute_magnitude,omitempty"` // the Sun's absolute magnitude in the band, for luminosities
}

// KCorrection says where K(z) comes from: exactly one of column,
// power_law, table and sed.
type KCorrection struct {
	Column           string   `toml:"column,omitempty"`             // column, mag
	PowerLaw         *float64 `toml:"power_law,omitempty"`          // alpha of f_nu ~ nu^alpha
	Table            string   `toml:"table,omitempty"`              // file: z, K or template, z, K
	Template         string   `toml:"template,omitempty"`           // column that names each row's template
	SED              string   `toml:"sed,omitempty"`                // file: wavelength, f_lambda
	Bandpass         string   `toml:"bandpass,omitempty"`           // file: wavelength, response
	BandpassKind     string   `toml:"bandpass_kind,omitempty"`      // photon (default) or energy: what the response counts
	WavelengthUnit   string   `toml:"wavelength_unit,omitempty"`    // angstrom (default) or nm
	RestBandRedshift float64  `toml:"rest_band_redshift,omitempty"` // shifts the band at rest, to z_r
	RestBandpass     string   `toml:"rest_bandpass,omitempty"`      // file: another band at rest
	ZeroPointSED     string   `toml:"zero_point_sed,omitempty"`     // file: the spectrum of magnitude 0; absent: AB
}

// Evolution is the term e = -Q (z - z0), in mag: Q > 0 is brighter in the past.
type Evolution struct {
	Q  float64 `toml:"q"`            // mag for one unit of redshift
	Z0 float64 `toml:"z0,omitempty"` // redshift at which e is 0, default 0
}

// Line is the flux of an emission line, in units of flux_scale erg/s/cm2.
type Line struct {
	Name      string   `toml:"name"`                 // ends the name of its column, line_luminosity_<line>
	Flux      string   `toml:"flux"`                 // column, in flux_scale
	FluxError string   `toml:"flux_error,omitempty"` // column, in the same unit
	Scale     *float64 `toml:"flux_scale,omitempty"` // erg/s/cm2 for one unit of the column; default 1
	Missing   []any    `toml:"missing,omitempty"`    // values that mean a missing flux
}

// Radio is a flux density at one observed frequency, S ~ nu^alpha.
type Radio struct {
	Name          string  `toml:"name"`                     // ends the name of its column, radio_luminosity_<radio>
	Flux          string  `toml:"flux"`                     // column, in flux_unit
	FluxError     string  `toml:"flux_error,omitempty"`     // column, in the same unit
	FluxUnit      string  `toml:"flux_unit,omitempty"`      // Jy, mJy (default), microJy
	SpectralIndex float64 `toml:"spectral_index,omitempty"` // alpha of S ~ nu^alpha, default 0
	Missing       []any   `toml:"missing,omitempty"`        // values that mean a missing flux
}

// Size is an angular size in arcsec.
type Size struct {
	Name    string `toml:"name"`                  // ends the name of its column, physical_size_<size>
	Angle   string `toml:"angle"`                 // column, arcsec
	Error   string `toml:"angle_error,omitempty"` // column, arcsec
	Missing []any  `toml:"missing,omitempty"`     // values that mean a missing angle
}

// Selection says which objects the survey could have seen.
type Selection struct {
	Name         string             `toml:"name"`                   // ends the names of its columns, as in v_max_main
	Band         string             `toml:"band,omitempty"`         // the band whose magnitudes are limited
	Bands        []Limit            `toml:"limit,omitempty"`        // limits in several bands, instead of band: their intersection
	Faint        any                `toml:"faint,omitempty"`        // faint limit, mag: a number or a column
	Bright       any                `toml:"bright,omitempty"`       // bright limit, mag: a number or a column
	LimitsOn     string             `toml:"limits_on,omitempty"`    // corrected (m - A) or observed (m); no default
	Area         any                `toml:"area,omitempty"`         // deg2: a number, or the column that names the field of each row
	FieldAreas   map[string]float64 `toml:"field_areas,omitempty"`  // deg2 of each field, where area names a column
	Redshift     []float64          `toml:"redshift,omitempty"`     // [lowest, highest] cosmological redshift of the selection
	Completeness string             `toml:"completeness,omitempty"` // column with the share of targets that were measured, C of 1/(C V_max)
	KCorrection  *KCorrection       `toml:"k_correction,omitempty"` // instead of the band's
}

// Limit is one band's part of a selection of several bands.
type Limit struct {
	Band        string       `toml:"band"`                   // a band of the job
	Faint       any          `toml:"faint,omitempty"`        // mag: a number or a column
	Bright      any          `toml:"bright,omitempty"`       // mag: a number or a column
	KCorrection *KCorrection `toml:"k_correction,omitempty"` // instead of the band's
}

// Cut is a volume-limited sample: redshift limits and an absolute magnitude.
type Cut struct {
	Name         string    `toml:"name"`                    // ends the name of its column, in_<sample>
	Band         string    `toml:"band"`                    // a band of the job
	BrighterThan *float64  `toml:"brighter_than,omitempty"` // absolute magnitude, mag
	Redshift     []float64 `toml:"redshift"`                // [lowest, highest] cosmological redshift
}

// Add says which columns to add, and in which units.
type Add struct {
	Columns    []string `toml:"columns"`               // columns and groups, as `catenrich columns` lists them
	LengthUnit string   `toml:"length_unit,omitempty"` // Mpc (default), Gpc, Glyr or Mpc/h
	Prefix     string   `toml:"prefix,omitempty"`      // begins every added name, enrich_status too
}

// Output says where the enriched catalogue goes and how it is written.
type Output struct {
	Directory string `toml:"directory,omitempty"` // where outputs go; a job has this or file
	File      string `toml:"file,omitempty"`      // the output of a single input
	Format    string `toml:"format,omitempty"`    // csv, parquet or fits; absent: the input's
	Digits    int    `toml:"digits,omitempty"`    // significant digits of numbers in text; 0 (default) is the shortest that reads back the same
	Float     int    `toml:"float,omitempty"`     // 64 (default) or 32 bits of an added number
	Encoding  string `toml:"encoding,omitempty"`  // Parquet: byte_stream_split (default) or plain
	Codec     string `toml:"codec,omitempty"`     // Parquet: zstd (default), snappy or none
	Level     int    `toml:"level,omitempty"`     // of zstd, 1 to 22; 0 (default) is the fastest
}

// Limits bounds what a unit may lose.
type Limits struct {
	MaxRejects int64 `toml:"max_rejects,omitempty"` // records of a unit that may be unreadable; more fail it. Default 0
}
