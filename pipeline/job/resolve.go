package job

import (
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"sort"
	"strconv"
	"strings"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A Job is a resolved job: the settings that decide bytes, and what does not.
type Job struct {
	Settings Settings
	Models   []*cosmo.Model // one for each of Settings.Cosmologies

	Bands      []BandPlan      // one for each of Settings.Bands
	Selections []SelectionPlan // one for each of Settings.Selections

	Title      string
	Patterns   []string // of input files, relative to Base
	Base       string   // directory that relative paths start from
	Directory  string   // of the outputs; "" if File is set
	File       string   // the output of a single input
	MaxRejects int64

	// Place names a setting as the user wrote it, for messages of later steps.
	Place func(path string) string

	paths map[Role]string
}

// RolePath is the key path of the setting that names the column of a role.
func (j *Job) RolePath(role Role) string {
	if path, ok := j.paths[role]; ok {
		return path
	}
	return "columns." + string(role)
}

// Band is the index of the band called name, or -1.
func (j *Job) Band(name string) int {
	return slices.IndexFunc(j.Bands, func(b BandPlan) bool { return b.Name == name })
}

// A Catalog knows the columns that can be added. Expand turns the names and
// groups the user asked for into column names in table order; every name it
// does not know is one error.
type Catalog interface {
	Expand(s *Settings, names []string) ([]string, []error)
}

// Resolve fills in defaults and checks every setting, and returns all that is
// wrong in one error: of class Usage where the job was made of flags alone,
// else of class Config.
func (f *File) Resolve(c Catalog) (*Job, error) {
	r := &resolver{file: f}
	r.job = &Job{
		Title: f.Title, Patterns: f.Input.Files, Base: filepath.Dir(f.Name), Directory: f.Output.Directory, File: f.Output.File,
		MaxRejects: f.Limits.MaxRejects, Place: f.Place, paths: make(map[Role]string),
	}
	s := &r.job.Settings
	s.OutputVersion = OutputVersion
	s.Catalogue, s.Missing = make(map[Role]string), make(map[Role]Numbers)
	if f.Name == "" {
		r.job.Base = "."
	}
	r.places()
	r.input(&s.Input)
	r.output(&s.Output)
	r.columns(s)
	r.redshift(&s.Redshift)
	r.cosmologies(s)
	r.bands(s)
	r.others(s)
	r.selections(s)
	r.added(s, c)
	if len(r.wrong) == 0 {
		return r.job, nil
	}
	err := errors.Join(r.wrong...)
	if f.Name == "" && !r.refused {
		return nil, fault.Usage.Wrap(err)
	}
	return nil, fault.Config.Wrap(err)
}

// resolver collects what is wrong while it fills in a Job.
type resolver struct {
	file    *File
	job     *Job
	wrong   []error
	refused bool // a fault of content, not of form: exit 78 even from flags

	// Where recorded settings are resolved: how side files are found by digest,
	// nil otherwise, and those that were not.
	find func(sha256 string) []byte
	lost []LostFile
}

// fail records a fault of the setting at path.
func (r *resolver) fail(path, format string, args ...any) {
	r.wrong = append(r.wrong, fmt.Errorf("%s %s", r.file.Place(path), fmt.Sprintf(format, args...)))
}

// choice returns value, or fallback where it is empty, and fails unless it is
// one of allowed.
func (r *resolver) choice(path, value, fallback string, allowed ...string) string {
	if value == "" {
		return fallback
	}
	if !slices.Contains(allowed, value) {
		r.fail(path, "is %q, want one of %s", value, table.Quote(allowed))
	}
	return value
}

// finite fails unless v is an ordinary number.
func (r *resolver) finite(path string, v float64) float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		r.fail(path, "is %v, want a finite number", v)
	}
	return v + 0 // -0 becomes 0
}

func (r *resolver) places() {
	f := r.file
	if len(f.Input.Files) == 0 {
		r.fail("input.files", "names no input: list files or patterns")
	}
	if f.Output.Directory == "" && f.Output.File == "" {
		r.fail("output.directory", "is not set: say where the enriched catalogue goes (output.directory, or -o FILE or DIR)")
	}
	if f.Output.Directory != "" && f.Output.File != "" {
		r.fail("output.file", "and output.directory exclude each other")
	}
	if f.Limits.MaxRejects < 0 {
		r.fail("limits.max_rejects", "is %d, want 0 or more", f.Limits.MaxRejects)
	}
}

// InputSettings resolves how the input is read, whatever the rest of the job
// is, for who only wants to look into a catalogue.
func (f *File) InputSettings() InputSettings {
	var s InputSettings
	r := &resolver{file: f}
	r.input(&s)
	return s
}

func (r *resolver) input(s *InputSettings) {
	in := &r.file.Input
	s.Format = r.choice("input.format", in.Format, "", Formats...)
	s.HDU = r.hdu(in.HDU)
	s.Delimiter = r.delimiter("input.csv.delimiter", in.CSV.Delimiter)
	s.HeaderDelimiter = r.delimiter("input.csv.header_delimiter", in.CSV.HeaderDelimiter)
	s.Quote = r.choice("input.csv.quote", in.CSV.Quote, `"`, `"`, "none")
	s.Comment = in.CSV.Comment
	s.Names = append([]string{}, in.CSV.Names...)
	switch header := in.CSV.Header.(type) {
	case nil:
		s.Header = "line"
	case bool:
		s.Header = map[bool]string{true: "line", false: "none"}[header]
	default:
		s.Header = "commented"
		if header != "commented" {
			r.fail("input.csv.header", `is %v, want true, false or "commented"`, header)
		}
	}
	switch {
	case s.Header == "commented" && s.Comment == "":
		s.Comment = "#"
	case s.Header == "none" && len(s.Names) == 0:
		r.fail("input.csv.names", "is not set: without a header the columns need names")
	case s.Header != "none" && len(s.Names) > 0:
		r.fail("input.csv.names", "is set, but the header names the columns: set header = false")
	}
}

// Formats are the names of the file formats that a job may ask for.
var Formats = []string{"csv", "parquet", "fits"}

// hdu accepts a number or a name; a name of digits is a number too.
func (r *resolver) hdu(value any) string {
	switch v := value.(type) {
	case nil:
		return ""
	case int64:
		if v >= 0 {
			return strconv.FormatInt(v, 10)
		}
	case string:
		if name := strings.TrimSpace(v); name != "" && !strings.HasPrefix(name, "-") {
			return name
		}
	}
	r.fail("input.hdu", "is %v, want the number of a table (0 is the primary header) or its EXTNAME", value)
	return ""
}

// delimiter accepts the one-byte delimiters that text tables use; "" leaves
// the choice to the suffix.
func (r *resolver) delimiter(path, value string) string {
	switch value {
	case "", ",", ";", "|", "\t", " ":
		return value
	case "tab", `\t`:
		return "\t"
	}
	r.fail(path, `is %q, want one of ",", ";", "|", "\t" or " " (space-aligned)`, value)
	return value
}

func (r *resolver) output(s *OutputSettings) {
	out := &r.file.Output
	s.Format = r.choice("output.format", out.Format, "", Formats...)
	s.Digits, s.Level = out.Digits, out.Level
	if s.Digits < 0 || s.Digits > 17 {
		r.fail("output.digits", "is %d, want 1 to 17 significant digits, or 0 for the shortest exact text", s.Digits)
	}
	if s.Float = out.Float; s.Float == 0 {
		s.Float = 64
	}
	if s.Float != 64 && s.Float != 32 {
		r.fail("output.float", "is %d, want 64 or 32", s.Float)
	}
	s.Encoding = r.choice("output.encoding", out.Encoding, "", "byte_stream_split", "plain")
	s.Codec = r.choice("output.codec", out.Codec, compression(out.File), "zstd", "snappy", "none")
	if s.Level < 0 || s.Level > 22 {
		r.fail("output.level", "is %d, want 1 to 22, or 0 for the fastest", s.Level)
	}
}

// compression is what the suffix of an output file asks for: it decides bytes,
// and so belongs to the settings. In a directory every output has the suffix
// of its unit.
func compression(file string) string {
	switch strings.ToLower(filepath.Ext(file)) {
	case ".gz":
		return "gzip"
	case ".zst":
		return "zst"
	}
	return ""
}

func (r *resolver) columns(s *Settings) {
	c := &r.file.Columns
	for role, name := range map[Role]string{
		RoleRedshift: c.Redshift, RoleVelocity: c.Velocity, RoleRedshiftError: c.RedshiftError, RoleVelocityError: c.VelocityError,
		RoleRedshiftLower: c.RedshiftLower, RoleRedshiftUpper: c.RedshiftUpper, RoleRedshiftHeliocentric: c.RedshiftHeliocentric,
		RolePeculiarVelocity: c.PeculiarVelocity, RoleRightAscension: c.RightAscension, RoleDeclination: c.Declination,
		RoleEBV: c.EBV, RoleEBVError: c.EBVError, RoleQuality: c.Quality,
	} {
		if name != "" {
			s.Catalogue[role] = name
		}
	}
	switch {
	case c.Redshift == "" && c.Velocity == "":
		r.fail("columns.redshift", "is not set: say which column holds the redshift (columns.redshift or --redshift), or columns.velocity with its convention")
	case c.Redshift != "" && c.Velocity != "":
		r.fail("columns.velocity", "and columns.redshift exclude each other")
	}
	uncertainties := []Role{RoleRedshiftError, RoleVelocityError, RoleRedshiftLower, RoleRedshiftUpper, RoleEBVError}
	others := []Role{RolePeculiarVelocity, RoleRedshiftHeliocentric, RoleEBV}
	r.missing(s, "columns.redshift_missing", c.RedshiftMissing, RoleRedshift)
	r.missing(s, "columns.velocity_missing", c.VelocityMissing, RoleVelocity)
	r.missing(s, "columns.position_missing", c.PositionMissing, RoleRightAscension, RoleDeclination)
	r.missing(s, "columns.error_missing", c.ErrorMissing, uncertainties...)
	r.missing(s, "columns.other_missing", c.OtherMissing, others...)
}

// missing gives the sentinels to those of roles that the catalogue has.
func (r *resolver) missing(s *Settings, path string, list []any, roles ...Role) {
	sentinels := r.numbers(path, list)
	used := false
	for _, role := range roles {
		if _, ok := s.Catalogue[role]; ok && len(sentinels) > 0 {
			s.Missing[role], used = sentinels, true
		}
	}
	if len(sentinels) > 0 && !used {
		r.fail(path, "is set, but no column it speaks of is")
	}
}

// numbers reads a list of TOML numbers, sorted, without repeats, -0 as 0.
func (r *resolver) numbers(path string, list []any) Numbers {
	out := Numbers{}
	for _, v := range list {
		number, ok := asNumber(v)
		if !ok {
			r.fail(path, "holds %v, want numbers", v)
			continue
		}
		out = append(out, r.finite(path, number))
	}
	slices.Sort(out)
	return slices.Compact(out)
}

func asNumber(v any) (float64, bool) {
	switch n := v.(type) {
	case int64:
		return float64(n), true
	case int:
		return float64(n), true
	case float64:
		return n, true
	}
	return 0, false
}

func (r *resolver) redshift(s *RedshiftSettings) {
	z, c := &r.file.Redshift, &r.file.Columns
	if c.Velocity != "" {
		s.Convention = r.choice("columns.velocity_convention", c.VelocityConvention, "", "optical", "radio", "relativistic")
		if s.Convention == "" {
			r.fail("columns.velocity_convention", `is not set: a velocity needs its convention, "optical", "radio" or "relativistic"`)
		}
		s.VelocityUnit = map[string]float64{"km/s": 1, "m/s": 1e-3}[r.choice("columns.velocity_unit", c.VelocityUnit, "km/s", "km/s", "m/s")]
	}
	s.Frame = r.choice("redshift.frame", z.Frame, "as-given", "as-given", "heliocentric", "barycentric", "cmb", "local-group")
	if s.Frame == "barycentric" {
		s.Frame = "heliocentric" // the same within 0.02 km/s
	}
	s.DistancesIn = r.choice("redshift.distances_in", z.DistancesIn, "as-given", "as-given", "cmb", "local-group")
	s.Valid = r.interval("redshift.valid", z.Valid)
	s.Signed = r.choice("redshift.negative", z.Negative, "null", "null", "signed") == "signed"
	s.QualityGood = r.marks("redshift.quality_good", z.QualityGood)
	switch {
	case c.Quality == "" && len(s.QualityGood) > 0:
		r.fail("redshift.quality_good", "is set, but columns.quality is not")
	case c.Quality != "" && len(s.QualityGood) == 0:
		r.fail("columns.quality", "is set, but redshift.quality_good does not say which marks are good")
	}
	r.frames(s)
	if s.PeculiarVelocitySigma = r.finite("redshift.peculiar_velocity_sigma", z.PeculiarVelocitySigma); s.PeculiarVelocitySigma < 0 {
		r.fail("redshift.peculiar_velocity_sigma", "is %v, want 0 or more, in km/s", s.PeculiarVelocitySigma)
	}
}

// frames checks that the route from the catalogue's frame to that of the
// distances can be taken.
func (r *resolver) frames(s *RedshiftSettings) {
	c := &r.file.Columns
	if (c.RightAscension == "") != (c.Declination == "") {
		r.fail("columns.right_ascension", "and columns.declination go together")
	}
	from, _ := frame.ParseFrame(s.Frame)
	to, _ := frame.ParseFrame(s.DistancesIn)
	if _, err := frame.NewRoute(from, to, c.RightAscension != ""); err != nil {
		r.fail("redshift.distances_in", "cannot be had: %v", err)
	}
	if c.RedshiftHeliocentric != "" && s.Frame == "heliocentric" {
		r.fail("columns.redshift_heliocentric", "is set, but redshift.frame says that the redshift is heliocentric already")
	}
	if (c.RedshiftLower == "") != (c.RedshiftUpper == "") {
		r.fail("columns.redshift_lower", "and columns.redshift_upper go together")
	}
	if c.RedshiftError != "" && c.Velocity != "" || c.VelocityError != "" && c.Redshift != "" {
		r.fail("columns.redshift_error", "goes with a redshift, columns.velocity_error with a velocity")
	}
}

// interval checks [lowest, highest]; an absent one is empty.
func (r *resolver) interval(path string, v []float64) Numbers {
	if len(v) == 0 {
		return Numbers{}
	}
	if len(v) != 2 || !(v[0] < v[1]) {
		r.fail(path, "is %v, want [lowest, highest]", v)
		return Numbers{}
	}
	return Numbers{r.finite(path, v[0]), r.finite(path, v[1])}
}

// marks reads quality marks: numbers, or text as soon as one of them is text.
func (r *resolver) marks(path string, list []any) []any {
	numbers, words := Numbers{}, []string{}
	for _, v := range list {
		if n, ok := asNumber(v); ok {
			numbers = append(numbers, r.finite(path, n))
		} else if word, ok := v.(string); ok {
			words = append(words, word)
		} else {
			r.fail(path, "holds %v, want numbers or text", v)
		}
	}
	if len(numbers) > 0 && len(words) > 0 {
		r.fail(path, "mixes numbers and text")
	}
	slices.Sort(numbers)
	sort.Strings(words)
	out := []any{}
	for _, n := range slices.Compact(numbers) {
		out = append(out, n)
	}
	for _, w := range slices.Compact(words) {
		out = append(out, w)
	}
	return out
}

func (r *resolver) added(s *Settings, c Catalog) {
	add := &r.file.Add
	s.LengthUnit = r.choice("add.length_unit", add.LengthUnit, "Mpc", "Mpc", "Gpc", "Glyr", "Mpc/h")
	s.Prefix = add.Prefix
	if len(add.Columns) == 0 {
		r.fail("add.columns", "is empty: there is nothing to add; name columns or groups (`catenrich columns` lists them)")
		return
	}
	names, wrong := c.Expand(s, add.Columns)
	for _, err := range wrong {
		r.fail("add.columns", "%v", err)
	}
	s.Added = names
}
