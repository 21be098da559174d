package job

import (
	"encoding/json"
	"fmt"

	"github.com/gowebpki/jcs"

	"catenrich/cosmo"
)

// OutputVersion counts the changes that gave the same job other bytes. A
// release that changes any output raises it; a test holds digests of outputs
// and fails when they move without it.
const OutputVersion = 1

// Settings is everything that decides the bytes of an output, resolved:
// defaults filled in, sets turned into numbers, lists sorted, groups expanded.
// Titles, paths, workers and memory are not in it. Its canonical JSON is
// recorded in every manifest, and its SHA-256 is the config hash.
type Settings struct {
	OutputVersion int                 `json:"outputVersion"`
	Input         InputSettings       `json:"input"`
	Output        OutputSettings      `json:"output"`
	Catalogue     map[Role]string     `json:"catalogue"` // role → column of the catalogue
	Missing       map[Role]Numbers    `json:"missing"`   // sentinels by role, sorted
	Redshift      RedshiftSettings    `json:"redshift"`
	Cosmologies   []ModelSettings     `json:"cosmologies"`
	Bands         []BandSettings      `json:"bands"` // by name, as all that follow
	Lines         []LineSettings      `json:"lines"`
	Radios        []RadioSettings     `json:"radios"`
	Sizes         []SizeSettings      `json:"sizes"`
	Selections    []SelectionSettings `json:"selections"`
	Cuts          []CutSettings       `json:"cuts"`
	Added         []string            `json:"added"` // without prefix and suffixes, in table order
	LengthUnit    string              `json:"lengthUnit"`
	Prefix        string              `json:"prefix"`
}

// A Role is what a column of the catalogue is to the job, named by its key in
// the job file.
type Role string

// The roles outside bands, lines, radio, sizes and selections.
const (
	RoleRedshift             Role = "redshift"
	RoleVelocity             Role = "velocity"
	RoleRedshiftError        Role = "redshift_error"
	RoleVelocityError        Role = "velocity_error"
	RoleRedshiftLower        Role = "redshift_lower"
	RoleRedshiftUpper        Role = "redshift_upper"
	RoleRedshiftHeliocentric Role = "redshift_heliocentric"
	RolePeculiarVelocity     Role = "peculiar_velocity"
	RoleRightAscension       Role = "right_ascension"
	RoleDeclination          Role = "declination"
	RoleEBV                  Role = "ebv"
	RoleEBVError             Role = "ebv_error"
	RoleQuality              Role = "quality"
)

// Numbers are JSON numbers; an absent list is [].
type Numbers []float64

// InputSettings is how the input is read. An empty string means "by the
// file's suffix".
type InputSettings struct {
	Format          string   `json:"format"`
	Delimiter       string   `json:"delimiter"`
	Quote           string   `json:"quote"` // "\"" or "none"
	Comment         string   `json:"comment"`
	Header          string   `json:"header"` // "line", "none" or "commented"
	HeaderDelimiter string   `json:"headerDelimiter"`
	Names           []string `json:"names"`
	HDU             string   `json:"hdu"` // number or EXTNAME; "" is the first table
}

// OutputSettings is how the output is written. An empty string means "as the
// input" for the format and "the format's default" for the rest.
type OutputSettings struct {
	Format   string `json:"format"`
	Digits   int    `json:"digits"` // 0 is the shortest text that reads back the same
	Float    int    `json:"float"`  // 64 or 32
	Encoding string `json:"encoding"`
	Codec    string `json:"codec"`
	Level    int    `json:"level"`
}

// RedshiftSettings is what the redshifts mean.
type RedshiftSettings struct {
	Convention            string  `json:"velocityConvention"` // "" where a redshift is given
	VelocityUnit          float64 `json:"velocityUnit"`       // km/s in one unit of the column; 0 where a redshift is given
	Frame                 string  `json:"frame"`
	DistancesIn           string  `json:"distancesIn"`
	Valid                 Numbers `json:"valid"`       // empty or [lowest, highest]
	QualityGood           []any   `json:"qualityGood"` // all numbers, or all text; sorted
	Signed                bool    `json:"signed"`      // negative redshifts get their formal continuation
	PeculiarVelocitySigma float64 `json:"peculiarVelocitySigma"`
}

// ModelSettings is one cosmology in numbers.
type ModelSettings struct {
	Suffix             string  `json:"suffix"`
	H0                 float64 `json:"h0"`
	OmegaM             float64 `json:"omegaM"`
	OmegaDE            float64 `json:"omegaDE"`
	Flat               bool    `json:"flat"`
	W0                 float64 `json:"w0"`
	Wa                 float64 `json:"wa"`
	CMBTemperature     float64 `json:"cmbTemperature"`
	EffectiveNeutrinos float64 `json:"effectiveNeutrinos"`
	NeutrinoMasses     Numbers `json:"neutrinoMasses"`
}

// Params are the settings as the cosmo package takes them.
func (m *ModelSettings) Params() cosmo.Params {
	p := cosmo.Params{
		H0: m.H0, OmegaM: m.OmegaM, OmegaDE: m.OmegaDE, Flat: m.Flat, W0: m.W0, Wa: m.Wa,
		TCMB: m.CMBTemperature, Neff: m.EffectiveNeutrinos, NeutrinoMasses: m.NeutrinoMasses,
	}
	if m.Flat {
		p.OmegaDE = 0
	}
	return p
}

// Canonical returns the settings as RFC 8785 canonical JSON.
func (s *Settings) Canonical() ([]byte, error) {
	plain, err := json.Marshal(s)
	if err != nil {
		return nil, fmt.Errorf("settings to JSON: %w", err)
	}
	canonical, err := jcs.Transform(plain)
	if err != nil {
		return nil, fmt.Errorf("settings to canonical JSON: %w", err)
	}
	return canonical, nil
}
