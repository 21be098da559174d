package demo

import "math"

// A defect is something wrong with a row, as the truth calls it, and how many
// rows of 20 000 have it. spoil changes the record; a broken record has none
// and is spoilt when it is written.
type defect struct {
	name  string
	count int
	about string // for the truth's header
	spoil func(r *record, d *dice)
}

func (d *defect) broken() bool { return d.name == shortRecord || d.name == longRecord }

// The defects of a record as such.
const (
	shortRecord = "short_record"
	longRecord  = "long_record"
)

// defects begins with none at all.
var defects = []defect{
	{name: ""},
	{name: shortRecord, count: 4, about: "the record breaks off in the middle"},
	{name: longRecord, count: 3, about: "the remark has commas and no quotes, so there are too many fields"},
	{name: "redshift_text", count: 5, about: `z_best is no number, for example "0.4.1"`, spoil: spoilText},
	{name: "redshift_empty", count: 60, about: "z_best is empty", spoil: func(r *record, _ *dice) { r.noRedshift(missing) }},
	{name: "redshift_sentinel", count: 80, about: "z_best is -99", spoil: func(r *record, _ *dice) { r.noRedshift(number(-99)) }},
	{name: "redshift_nan", count: 20, about: "z_best is NaN", spoil: func(r *record, _ *dice) { r.noRedshift(number(math.NaN())) }},
	{name: "redshift_zero", count: 12, about: "z_best is 0", spoil: func(r *record, _ *dice) { r[colZBest] = number(0) }},
	{name: "redshift_undeclared", count: 5, about: "z_best is -9, a sentinel that nobody declared", spoil: func(r *record, _ *dice) { r[colZBest] = number(-9) }},
	{name: "redshift_beyond", count: 6, about: "z_best is above 12, a failure of the fit", spoil: func(r *record, d *dice) { r[colZBest] = number(round(d.between(14, 20), 4)) }},
	{name: "redshift_error_missing", count: 30, about: "z_err is empty", spoil: func(r *record, _ *dice) { r[colZErr] = missing }},
	{name: "quantiles_reversed", count: 25, about: "z_lower and z_upper have changed places", spoil: func(r *record, _ *dice) { r[colZLower], r[colZUpper] = r[colZUpper], r[colZLower] }},
	{name: "position_missing", count: 6, about: "ra and dec are empty", spoil: func(r *record, _ *dice) { r[colRA], r[colDec] = missing, missing }},
	{name: "position_range", count: 3, about: "dec is above 90", spoil: func(r *record, _ *dice) { r[colDec] = number(95.5) }},
	{name: "ebv_missing", count: 30, about: "ebv is empty", spoil: func(r *record, _ *dice) { r[colEBV] = missing }},
	{name: "template_missing", count: 40, about: "template is empty", spoil: func(r *record, _ *dice) { r[colTemplate] = missing }},
	{name: "mag_r_sentinel", count: 200, about: "mag_r and magerr_r are -99", spoil: func(r *record, _ *dice) { r[colMagR], r[colMagErrR] = number(-99), number(-99) }},
	{name: "magerr_r_sentinel", count: 50, about: "magerr_r is -99", spoil: func(r *record, _ *dice) { r[colMagErrR] = number(-99) }},
	{name: "mag_g_empty", count: 150, about: "mag_g and magerr_g are empty", spoil: func(r *record, _ *dice) { r[colMagG], r[colMagErrG] = missing, missing }},
	{name: "flux_i_nan", count: 60, about: "flux_i is NaN and ivar_i is 0", spoil: func(r *record, _ *dice) { r[colFluxI], r[colIvarI] = number(math.NaN()), number(0) }},
	{name: "flux_i_negative", count: 40, about: "flux_i is negative, the sky was brighter", spoil: func(r *record, d *dice) { r[colFluxI] = number(-round(d.between(0.001, 0.2), 5)) }},
}

func spoilText(r *record, d *dice) {
	r[colZBest] = text([]string{"0.4.1", "1.2e", "??", "see note", "0,31"}[d.below(5)])
}

// noRedshift takes the redshift from a row, with all that comes of it.
func (r *record) noRedshift(v value) {
	r[colZBest] = v
	r[colZErr], r[colZLower], r[colZUpper], r[colKG] = missing, missing, missing, missing
	r[colZFlag] = number(0)
}
