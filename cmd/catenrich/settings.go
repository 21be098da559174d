package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/spf13/pflag"

	"catenrich/internal/fault"
	"catenrich/pipeline"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// A setting is a flag that stands for a key of the job file.
type setting struct {
	flag, short string
	path        string // key path in the job file
	value       string // what the help calls the value
	usage       string
	set         func(f *job.File, value string) error
}

// settings are the flags that make a job, in the order of the help.
var settings = []setting{
	{"redshift", "", "columns.redshift", "COLUMN", "column with the redshift", text(func(f *job.File) *string { return &f.Columns.Redshift })},
	{"redshift-missing", "", "columns.redshift_missing", "NUMBERS", "values that mean a missing redshift, such as -99", list(func(f *job.File) *[]any { return &f.Columns.RedshiftMissing })},
	{"velocity", "", "columns.velocity", "COLUMN", "column with a velocity, instead of a redshift", text(func(f *job.File) *string { return &f.Columns.Velocity })},
	{"velocity-convention", "", "columns.velocity_convention", "NAME", "optical, radio or relativistic", text(func(f *job.File) *string { return &f.Columns.VelocityConvention })},
	{"velocity-unit", "", "columns.velocity_unit", "UNIT", "km/s (default) or m/s", text(func(f *job.File) *string { return &f.Columns.VelocityUnit })},
	{"velocity-missing", "", "columns.velocity_missing", "NUMBERS", "values that mean a missing velocity", list(func(f *job.File) *[]any { return &f.Columns.VelocityMissing })},
	{"quality", "", "columns.quality", "COLUMN", "column with the survey's quality mark", text(func(f *job.File) *string { return &f.Columns.Quality })},
	{"quality-good", "", "redshift.quality_good", "MARKS", "marks of usable redshifts, such as 3,4", list(func(f *job.File) *[]any { return &f.Redshift.QualityGood })},
	{"valid", "", "redshift.valid", "LOW,HIGH", "range of redshifts to believe", numbers(func(f *job.File) *[]float64 { return &f.Redshift.Valid })},
	{"negative", "", "redshift.negative", "WHAT", "null (default) or signed, for z < 0", text(func(f *job.File) *string { return &f.Redshift.Negative })},
	{"redshift-error", "", "columns.redshift_error", "COLUMN", "column with the redshift's error", text(func(f *job.File) *string { return &f.Columns.RedshiftError })},
	{"ra", "", "columns.right_ascension", "COLUMN", "right ascension, degrees or sexagesimal hours", text(func(f *job.File) *string { return &f.Columns.RightAscension })},
	{"dec", "", "columns.declination", "COLUMN", "declination, degrees or sexagesimal", text(func(f *job.File) *string { return &f.Columns.Declination })},
	{"frame", "", "redshift.frame", "NAME", "what the redshifts are: as-given, heliocentric, cmb or local-group", text(func(f *job.File) *string { return &f.Redshift.Frame })},
	{"distances-in", "", "redshift.distances_in", "NAME", "frame to compute distances in: as-given, cmb or local-group", text(func(f *job.File) *string { return &f.Redshift.DistancesIn })},
	{"peculiar-velocity", "", "columns.peculiar_velocity", "COLUMN", "peculiar velocity, km/s, positive away from us", text(func(f *job.File) *string { return &f.Columns.PeculiarVelocity })},
	{"peculiar-velocity-sigma", "", "redshift.peculiar_velocity_sigma", "KM/S", "spread of unknown peculiar velocities, for errors", plain(func(f *job.File) *float64 { return &f.Redshift.PeculiarVelocitySigma })},
	{"ebv", "", "columns.ebv", "COLUMN", "E(B-V), which extinction coefficients multiply", text(func(f *job.File) *string { return &f.Columns.EBV })},
	{"band", "", "band[0].name", "NAME", "name of the band that the following flags describe (default: m)", text(func(f *job.File) *string { return &band(f).Name })},
	{"magnitude", "", "band[0].magnitude", "COLUMN", "column with the band's magnitude", text(func(f *job.File) *string { return &band(f).Magnitude })},
	{"magnitude-error", "", "band[0].magnitude_error", "COLUMN", "column with its error", text(func(f *job.File) *string { return &band(f).MagnitudeError })},
	{"magnitude-missing", "", "band[0].missing", "NUMBERS", "values that mean a missing magnitude", list(func(f *job.File) *[]any { return &band(f).Missing })},
	{"extinction", "", "band[0].extinction", "NUMBER|COLUMN", "coefficient that multiplies E(B-V), or a column in mag", func(f *job.File, value string) error {
		band(f).Extinction = numberOrName(value)
		return nil
	}},
	{"k-power-law", "", "band[0].k_correction.power_law", "ALPHA", "K-correction of a power law f_nu ~ nu^ALPHA", number(func(f *job.File) **float64 { return &kCorrection(f).PowerLaw })},
	{"k-column", "", "band[0].k_correction.column", "COLUMN", "column with the K-correction", text(func(f *job.File) *string { return &kCorrection(f).Column })},
	{"k-table", "", "band[0].k_correction.table", "FILE", "table of z and K", text(func(f *job.File) *string { return &kCorrection(f).Table })},
	{"solar-magnitude", "", "band[0].solar_absolute_magnitude", "MAG", "the Sun's absolute magnitude, for luminosities", number(func(f *job.File) **float64 { return &band(f).SolarAbsoluteMagnitude })},
	{"faint", "", "selection[0].faint", "MAG|COLUMN", "faint limit of the selection called main", func(f *job.File, value string) error {
		selection(f).Faint = numberOrName(value)
		return nil
	}},
	{"bright", "", "selection[0].bright", "MAG|COLUMN", "its bright limit", func(f *job.File, value string) error {
		selection(f).Bright = numberOrName(value)
		return nil
	}},
	{"limits-on", "", "selection[0].limits_on", "WHAT", "corrected (m - A) or observed magnitudes", text(func(f *job.File) *string { return &selection(f).LimitsOn })},
	{"area", "", "selection[0].area", "DEG2", "area of the survey", func(f *job.File, value string) error {
		selection(f).Area = numberOrName(value)
		return nil
	}},
	{"selection-redshift", "", "selection[0].redshift", "LOW,HIGH", "redshift limits of the selection", numbers(func(f *job.File) *[]float64 { return &selection(f).Redshift })},
	{"set", "", "cosmology[0].set", "NAME", "named set of cosmological parameters (default " + job.DefaultSet + ")", text(func(f *job.File) *string { return &model(f).Set })},
	{"h0", "", "cosmology[0].h0", "NUMBER", "Hubble constant, km/s/Mpc", number(func(f *job.File) **float64 { return &model(f).H0 })},
	{"omega-m", "", "cosmology[0].omega_m", "NUMBER", "matter density without neutrinos", number(func(f *job.File) **float64 { return &model(f).OmegaM })},
	{"omega-de", "", "cosmology[0].omega_de", "NUMBER", "dark-energy density (default: flat)", number(func(f *job.File) **float64 { return &model(f).OmegaDE })},
	{"w0", "", "cosmology[0].w0", "NUMBER", "dark-energy equation of state today (default -1)", number(func(f *job.File) **float64 { return &model(f).W0 })},
	{"wa", "", "cosmology[0].wa", "NUMBER", "its change with the scale factor (default 0)", number(func(f *job.File) **float64 { return &model(f).Wa })},
	{"cmb-temperature", "", "cosmology[0].cmb_temperature", "KELVIN", "temperature of the CMB (default 0: no radiation)", number(func(f *job.File) **float64 { return &model(f).CMBTemperature })},
	{"effective-neutrinos", "", "cosmology[0].effective_neutrinos", "NUMBER", "effective number of neutrinos", number(func(f *job.File) **float64 { return &model(f).EffectiveNeutrinos })},
	{"neutrino-masses", "", "cosmology[0].neutrino_masses", "EV,EV,…", "neutrino masses, eV", numbers(func(f *job.File) *[]float64 { return &model(f).NeutrinoMasses })},
	{"add", "a", "add.columns", "NAMES", "columns or groups to add", words(func(f *job.File) *[]string { return &f.Add.Columns })},
	{"length-unit", "", "add.length_unit", "UNIT", "Mpc (default), Gpc, Glyr or Mpc/h", text(func(f *job.File) *string { return &f.Add.LengthUnit })},
	{"prefix", "", "add.prefix", "TEXT", "put before every added name", text(func(f *job.File) *string { return &f.Add.Prefix })},
	{"format", "", "input.format", "NAME", "format of the input, where its suffix does not tell", text(func(f *job.File) *string { return &f.Input.Format })},
	{"hdu", "", "input.hdu", "TABLE", "FITS: number (0 is the primary header) or EXTNAME of the table (default: the first)", func(f *job.File, value string) error {
		f.Input.HDU = value
		return nil
	}},
	{"delimiter", "", "input.csv.delimiter", "CHAR", `"," (default), "\t" (default for .tsv), ";", "|" or " " (space-aligned)`, text(func(f *job.File) *string { return &f.Input.CSV.Delimiter })},
	{"quote", "", "input.csv.quote", "CHAR", `"\"" (default) or none`, text(func(f *job.File) *string { return &f.Input.CSV.Quote })},
	{"comment", "", "input.csv.comment", "TEXT", "start of lines that are no rows", text(func(f *job.File) *string { return &f.Input.CSV.Comment })},
	{"header", "", "input.csv.header", "WHAT", "true (default), false or commented", header},
	{"header-delimiter", "", "input.csv.header_delimiter", "CHAR", "delimiter of the header, where it has its own", text(func(f *job.File) *string { return &f.Input.CSV.HeaderDelimiter })},
	{"names", "", "input.csv.names", "NAMES", "column names, where there is no header", words(func(f *job.File) *[]string { return &f.Input.CSV.Names })},
	{"output", "o", "output.directory", "PATH", "output file, directory, or - for standard output", nil},
	{"output-format", "", "output.format", "NAME", "format of the output (default: the input's)", text(func(f *job.File) *string { return &f.Output.Format })},
	{"digits", "", "output.digits", "N", "significant digits in text (default: shortest exact)", whole(func(f *job.File) *int { return &f.Output.Digits })},
	{"float", "", "output.float", "BITS", "64 (default) or 32", whole(func(f *job.File) *int { return &f.Output.Float })},
	{"encoding", "", "output.encoding", "NAME", "Parquet: byte_stream_split (default) or plain", text(func(f *job.File) *string { return &f.Output.Encoding })},
	{"codec", "", "output.codec", "NAME", "Parquet: zstd (default), snappy or none", text(func(f *job.File) *string { return &f.Output.Codec })},
	{"level", "", "output.level", "N", "compression level (default: the fastest)", whole(func(f *job.File) *int { return &f.Output.Level })},
	{"max-rejects", "", "limits.max_rejects", "N", "records that a unit may lose as unreadable", func(f *job.File, value string) (err error) {
		f.Limits.MaxRejects, err = strconv.ParseInt(value, 10, 64)
		return err
	}},
}

// model is the cosmology that flags speak of: the first.
func model(f *job.File) *job.Cosmology {
	if len(f.Cosmology) == 0 {
		f.Cosmology = []job.Cosmology{{}}
	}
	return &f.Cosmology[0]
}

// band is the band that flags speak of: the first.
func band(f *job.File) *job.Band {
	if len(f.Band) == 0 {
		f.Band = []job.Band{{Name: "m"}}
	}
	return &f.Band[0]
}

func kCorrection(f *job.File) *job.KCorrection {
	b := band(f)
	if b.KCorrection == nil {
		b.KCorrection = new(job.KCorrection)
	}
	return b.KCorrection
}

// selection is the selection that flags speak of: the first, in their band.
func selection(f *job.File) *job.Selection {
	if len(f.Selection) == 0 {
		f.Selection = []job.Selection{{Name: "main", Band: band(f).Name}}
	}
	return &f.Selection[0]
}

// numberOrName is a number where it reads as one, else the name of a column.
func numberOrName(value string) any {
	if v, err := strconv.ParseFloat(value, 64); err == nil {
		return v
	}
	return value
}

func text(field func(*job.File) *string) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		*field(f) = value
		return nil
	}
}

func number(field func(*job.File) **float64) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		v, err := strconv.ParseFloat(value, 64)
		if err != nil {
			return fmt.Errorf("is %q, want a number", value)
		}
		*field(f) = &v
		return nil
	}
}

func plain(field func(*job.File) *float64) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		v, err := strconv.ParseFloat(value, 64)
		if err != nil {
			return fmt.Errorf("is %q, want a number", value)
		}
		*field(f) = v
		return nil
	}
}

func whole(field func(*job.File) *int) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		v, err := strconv.Atoi(value)
		if err != nil {
			return fmt.Errorf("is %q, want a whole number", value)
		}
		*field(f) = v
		return nil
	}
}

func numbers(field func(*job.File) *[]float64) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		var all []float64
		for _, part := range strings.Split(value, ",") {
			v, err := strconv.ParseFloat(strings.TrimSpace(part), 64)
			if err != nil {
				return fmt.Errorf("holds %q, want numbers between commas", part)
			}
			all = append(all, v)
		}
		*field(f) = all
		return nil
	}
}

func words(field func(*job.File) *[]string) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		for _, part := range strings.Split(value, ",") {
			*field(f) = append(*field(f), strings.TrimSpace(part))
		}
		return nil
	}
}

// list takes numbers where they are numbers, else text, as TOML would.
func list(field func(*job.File) *[]any) func(*job.File, string) error {
	return func(f *job.File, value string) error {
		var all []any
		for _, part := range strings.Split(value, ",") {
			part = strings.TrimSpace(part)
			if v, err := strconv.ParseFloat(part, 64); err == nil {
				all = append(all, v)
			} else {
				all = append(all, part)
			}
		}
		*field(f) = all
		return nil
	}
}

func header(f *job.File, value string) error {
	f.Input.CSV.Header = value
	if b, err := strconv.ParseBool(value); err == nil {
		f.Input.CSV.Header = b
	}
	return nil
}

// jobFlags are the settings that a command line gives.
type jobFlags struct {
	given []struct {
		setting *setting
		value   string
	}
	output string
}

// register adds the flags of every setting.
func (j *jobFlags) register(flags *pflag.FlagSet) {
	for i := range settings {
		s := &settings[i]
		flags.VarP(&flagValue{s, j}, s.flag, s.short, s.usage)
	}
	flags.SortFlags = false
}

// flagValue collects the values of one flag.
type flagValue struct {
	setting *setting
	flags   *jobFlags
}

func (v *flagValue) String() string { return "" }
func (v *flagValue) Type() string   { return v.setting.value }

func (v *flagValue) Set(value string) error {
	if v.setting.set == nil {
		v.flags.output = value
		return nil
	}
	v.flags.given = append(v.flags.given, struct {
		setting *setting
		value   string
	}{v.setting, value})
	return nil
}

// file makes the job file of a command line: a JOB.toml with flags on top, or
// input files with flags alone.
func (j *jobFlags) file(args []string) (*job.File, error) {
	f := new(job.File)
	if len(args) == 1 && strings.HasSuffix(args[0], ".toml") {
		text, err := job.Read(args[0])
		if err != nil {
			return nil, fault.NoInput.Errorf("the job file cannot be read: %w", err)
		}
		if f, err = job.Parse(args[0], text); err != nil {
			return nil, err
		}
	} else {
		if len(args) == 0 {
			return nil, fault.Usage.Errorf("no input: name a job file (JOB.toml) or catalogues (- for standard input)")
		}
		f.Input.Files = args
		f.Flagged("input.files", "FILES")
	}
	if err := j.apply(f); err != nil {
		return nil, err
	}
	j.place(f, len(args))
	return f, nil
}

// apply sets the keys that flags give.
func (j *jobFlags) apply(f *job.File) error {
	own := map[string]bool{"cosmology": len(f.Cosmology) > 0, "band": len(f.Band) > 0, "selection": len(f.Selection) > 0}
	for _, g := range j.given {
		if list, _, ok := strings.Cut(g.setting.path, "["); ok && own[list] {
			return fault.Usage.Errorf("--%s cannot be combined with the [[%s]] of %s", g.setting.flag, list, f.Name)
		}
		f.Flagged(g.setting.path, "--"+g.setting.flag)
		if err := g.setting.set(f, g.value); err != nil {
			return fault.Usage.Errorf("--%s %w", g.setting.flag, err)
		}
	}
	if !own["selection"] && len(f.Selection) > 0 {
		f.Selection[0].Band = band(f).Name // --band may have come later
	}
	for i := range settings {
		if f.Name == "" {
			f.Flagged(settings[i].path, "--"+settings[i].flag)
		}
	}
	return nil
}

// place decides whether -o names a file or a directory: a directory if it is
// one, ends in a slash, or several inputs were named.
func (j *jobFlags) place(f *job.File, inputs int) {
	if j.output == "" {
		return
	}
	out := j.output
	if f.Name != "" && out != pipeline.Standard && !filepath.IsAbs(out) {
		if abs, err := filepath.Abs(out); err == nil { // relative to here, not to the job file
			out = abs
		}
	}
	info, err := os.Stat(out)
	isDir := err == nil && info.IsDir() || strings.HasSuffix(j.output, "/") || inputs > 1 || filepath.Ext(out) == ""
	if isDir && out != pipeline.Standard {
		f.Output.Directory, f.Output.File = out, ""
	} else {
		f.Output.Directory, f.Output.File = "", out
	}
	f.Flagged("output.directory", "--output")
	f.Flagged("output.file", "--output")
}

// resolve makes the job of a command line.
func (j *jobFlags) resolve(args []string) (*job.Job, *job.File, error) {
	f, err := j.file(args)
	if err != nil {
		return nil, nil, err
	}
	resolved, err := f.Resolve(columns.Catalog{})
	return resolved, f, err
}
