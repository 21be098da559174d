package demo

import (
	"encoding/binary"
	"math"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/schema"
)

// An extra is what only the wide catalogue says of an object. All of it is
// noise of the right shape.
type extra struct {
	floats    [len(floatNames)]float32
	nulls     [len(floatNames)]bool
	radius    float64
	ccd       int32
	visits    int32
	flags     int64
	fibre     int32 // -1 for none
	extended  bool
	micros    int64 // since 1970, UTC
	airmass   int32 // thousandths
	mjd       int64 // 1e-8 d
	flux      [16]byte
	uuid      [16]byte
	thumbnail [24]byte
	apertures []float64
	pdf       []float32
	lines     []line
	tags      [][2]string
}

// A line is an emission line that the spectrum shows.
type line struct {
	name       string
	wavelength float64 // Angstrom, as observed
	flux       float32
}

// floatNames are the columns of float32.
var floatNames = [...]string{
	"mag_u", "magerr_u", "mag_z", "magerr_z", "mag_y", "magerr_y",
	"ellipticity", "position_angle", "sersic_index", "fit_chi2", "sky_background", "seeing",
}

// restLines are emission lines with their wavelengths in vacuum, Angstrom
// (common practice, no source).
var restLines = []line{{name: "[O II]", wavelength: 3728.5}, {name: "H beta", wavelength: 4862.7}, {name: "[O III]", wavelength: 5008.2}, {name: "H alpha", wavelength: 6564.6}}

// fill draws everything.
func (e *extra) fill(t *truth, r *record, d *dice) {
	g, mag := d.gauss(), r[colMagG].number
	for i := range e.floats {
		e.floats[i], e.nulls[i] = float32(round(mag+float64(i)+d.gauss(), 3)), d.chance(0.05)
	}
	e.radius = round(math.Abs(0.8+float64(0.3*g)), 4)
	e.ccd, e.visits, e.flags = int32(d.below(40)), int32(1+d.below(12)), int64(d.source.Uint64()&^(1<<40-1))
	if e.fibre = -1; !r[colZSpec].isText {
		e.fibre = int32(d.below(400))
	}
	e.extended = t.kind == galaxy || t.kind == blueshifted
	night := int64(d.below(900))
	e.micros = (18500+night)*86400e6 + int64(d.below(36000))*1e6 + int64(d.below(1000000))
	e.airmass = int32(1000 + d.below(900))
	e.mjd = (40587+18500+night)*1e8 + int64(d.below(40000000))
	binary.BigEndian.PutUint64(e.flux[8:], d.source.Uint64()>>1)
	binary.BigEndian.PutUint64(e.uuid[:8], d.source.Uint64())
	binary.BigEndian.PutUint64(e.uuid[8:], d.source.Uint64())
	for i := 0; i < len(e.thumbnail); i += 8 {
		binary.LittleEndian.PutUint64(e.thumbnail[i:], d.source.Uint64())
	}
	e.fillNested(t, d)
}

func (e *extra) fillNested(t *truth, d *dice) {
	e.apertures, e.pdf, e.lines, e.tags = nil, nil, nil, nil
	for range d.below(6) {
		e.apertures = append(e.apertures, round(d.between(0.1, 50), 4))
	}
	for range 4 * d.below(3) {
		e.pdf = append(e.pdf, float32(round(d.uniform(), 3)))
	}
	for _, l := range restLines[:d.below(len(restLines)+1)] {
		l.wavelength = round(l.wavelength*(1+t.zhel), 2)
		l.flux = float32(round(d.between(1, 90), 2))
		e.lines = append(e.lines, l)
	}
	for _, key := range []string{"release", "tile"}[:d.below(3)] {
		e.tags = append(e.tags, [2]string{key, []string{"a", "b", "β"}[d.below(3)]})
	}
}

// wideColumns are the 60 columns, in order.
func wideColumns() []wideColumn {
	id := sameText(colID, false)
	id.node = textNode("object_id", parquet.Repetitions.Required)
	columns := []wideColumn{id, sameText(colField, true)}
	for c := colRA; c < colTemplate; c++ {
		if c == colZFlag {
			columns = append(columns, sameInteger(c))
		} else {
			columns = append(columns, sameNumber(c))
		}
	}
	columns = append(columns, sameText(colTemplate, true), sameNumber(colSNR), sameText(colRemarks, false))
	for i, name := range floatNames {
		columns = append(columns, wideColumn{node: schema.NewFloat32Node(name, parquet.Repetitions.Optional, -1), leaves: []leafWriter{
			flat(func(r *wideRow) (float32, bool) { return r.extra.floats[i], !r.extra.nulls[i] }),
		}})
	}
	columns = append(columns, numberColumns()...)
	columns = append(columns, typedColumns()...)
	return append(columns, nestedColumns()...)
}

// numberColumns are plain numbers, a truth value and texts.
func numberColumns() []wideColumn {
	opt := parquet.Repetitions.Optional
	int16Type, uint64Type := schema.NewIntLogicalType(16, true), schema.NewIntLogicalType(64, false)
	return []wideColumn{
		{node: schema.NewFloat64Node("half_light_radius", opt, -1), leaves: []leafWriter{flat(func(r *wideRow) (float64, bool) { return r.extra.radius, true })}},
		{node: schema.NewFloat64Node("parallax", opt, -1), leaves: []leafWriter{flat(func(r *wideRow) (float64, bool) { return r.extra.radius, r.truth.kind == star })}},
		{node: schema.NewFloat64Node("reserved", opt, -1), leaves: []leafWriter{flat(func(*wideRow) (float64, bool) { return 0, false })}},
		{node: schema.NewInt32Node("ccd", opt, -1), few: true, leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return r.extra.ccd, true })}},
		{node: logical("visits", int16Type, parquet.Types.Int32, -1), leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return r.extra.visits, true })}},
		{node: logical("flags", uint64Type, parquet.Types.Int64, -1), leaves: []leafWriter{flat(func(r *wideRow) (int64, bool) { return r.extra.flags, true })}},
		{node: schema.NewInt32Node("fibre", opt, -1), leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return r.extra.fibre, r.extra.fibre >= 0 })}},
		{node: schema.NewBooleanNode("is_extended", opt, -1), leaves: []leafWriter{flat(func(r *wideRow) (bool, bool) { return r.extra.extended, true })}},
		textColumn("filter_set", true, func(r *wideRow) string { return []string{"griz", "ugrizy"}[r.extra.ccd%2] }),
		textColumn("pipeline_run", true, func(r *wideRow) string { return []string{"R1", "R2", "R3"}[r.extra.visits%3] }),
		textColumn("observer_notes", false, func(r *wideRow) string {
			if r.extra.visits == 1 {
				return r.record[colRemarks].text
			}
			return ""
		}),
	}
}

// typedColumns are times, decimals and bytes.
func typedColumns() []wideColumn {
	micros := schema.NewTimestampLogicalType(true, schema.TimeUnitMicros)
	millis := schema.NewTimeLogicalType(true, schema.TimeUnitMillis)
	return []wideColumn{
		{node: logical("observed_at", micros, parquet.Types.Int64, -1), leaves: []leafWriter{flat(func(r *wideRow) (int64, bool) { return r.extra.micros, true })}},
		{node: logical("night", schema.DateLogicalType{}, parquet.Types.Int32, -1), leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return int32(r.extra.micros / 86400e6), true })}},
		{node: logical("shutter", millis, parquet.Types.Int32, -1), leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return int32(r.extra.micros / 1000 % 86400000), true })}},
		{node: logical("airmass", schema.NewDecimalLogicalType(5, 3), parquet.Types.Int32, -1), leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) { return r.extra.airmass, true })}},
		{node: logical("mjd", schema.NewDecimalLogicalType(18, 8), parquet.Types.Int64, -1), leaves: []leafWriter{flat(func(r *wideRow) (int64, bool) { return r.extra.mjd, true })}},
		{node: logical("flux_exact", schema.NewDecimalLogicalType(38, 10), parquet.Types.FixedLenByteArray, 16), leaves: []leafWriter{flat(func(r *wideRow) (parquet.FixedLenByteArray, bool) { return r.extra.flux[:], true })}},
		{node: logical("uuid", schema.UUIDLogicalType{}, parquet.Types.FixedLenByteArray, 16), leaves: []leafWriter{flat(func(r *wideRow) (parquet.FixedLenByteArray, bool) { return r.extra.uuid[:], true })}},
		{node: schema.NewByteArrayNode("thumbnail", parquet.Repetitions.Optional, -1), leaves: []leafWriter{flat(func(r *wideRow) (parquet.ByteArray, bool) { return r.extra.thumbnail[:], r.extra.ccd < 20 })}},
	}
}

// logical makes an optional column with a logical type.
func logical(name string, l schema.LogicalType, physical parquet.Type, length int) schema.Node {
	return schema.MustPrimitive(schema.NewPrimitiveNodeLogical(name, parquet.Repetitions.Optional, l, physical, length, -1))
}

// nestedColumns are two lists, a struct with a list of structs, and a map.
func nestedColumns() []wideColumn {
	opt, req := parquet.Repetitions.Optional, parquet.Repetitions.Required
	apertures := schema.MustGroup(schema.ListOf(schema.NewFloat64Node("apertures_r", req, -1), opt, -1))
	pdf := schema.MustGroup(schema.ListOf(schema.NewFloat32Node("z_pdf", opt, -1), opt, -1))
	one := schema.MustGroup(schema.NewGroupNode("lines", req, schema.FieldList{
		textNode("name", req), schema.NewFloat64Node("wavelength", req, -1), schema.NewFloat32Node("flux", opt, -1),
	}, -1))
	lines := schema.MustGroup(schema.ListOf(one, opt, -1))
	spectrum := schema.MustGroup(schema.NewGroupNode("spectrum", opt, schema.FieldList{
		textNode("instrument", opt), schema.NewFloat64Node("exposure", req, -1), lines,
	}, -1))
	tags := schema.MustGroup(schema.MapOf("tags", textNode("key", req), textNode("value", opt), opt, -1))
	return []wideColumn{
		{node: apertures, leaves: []leafWriter{nested(func(r *wideRow, l *levels[float64]) { each(l, r.extra.apertures, true, 0, 2, same) })}},
		{node: pdf, leaves: []leafWriter{nested(func(r *wideRow, l *levels[float32]) { each(l, r.extra.pdf, len(r.extra.apertures) > 0, 0, 3, same) })}},
		{node: spectrum, leaves: []leafWriter{
			nested(func(r *wideRow, l *levels[parquet.ByteArray]) {
				if r.extra.fibre < 0 {
					l.none(0, 0)
				} else {
					l.add(parquet.ByteArray("multi-object"), 2, 0)
				}
			}),
			nested(func(r *wideRow, l *levels[float64]) {
				if r.extra.fibre < 0 {
					l.none(0, 0)
				} else {
					l.add(float64(600*r.extra.visits), 1, 0)
				}
			}),
			ofLines(3, func(x line) parquet.ByteArray { return parquet.ByteArray(x.name) }),
			ofLines(3, func(x line) float64 { return x.wavelength }),
			ofLines(4, func(x line) float32 { return x.flux }),
		}},
		{node: tags, leaves: []leafWriter{
			nested(func(r *wideRow, l *levels[parquet.ByteArray]) {
				each(l, r.extra.tags, true, 0, 2, func(x [2]string) parquet.ByteArray { return parquet.ByteArray(x[0]) })
			}),
			nested(func(r *wideRow, l *levels[parquet.ByteArray]) {
				each(l, r.extra.tags, true, 0, 3, func(x [2]string) parquet.ByteArray { return parquet.ByteArray(x[1]) })
			}),
		}},
	}
}

func same[T any](v T) T { return v }

// ofLines makes a leaf of spectrum.lines, defined at level full.
func ofLines[T any](full int16, get func(line) T) leafWriter {
	return nested(func(r *wideRow, l *levels[T]) {
		if r.extra.fibre < 0 {
			l.none(0, 0) // no spectrum
			return
		}
		each(l, r.extra.lines, true, 1, full, get)
	})
}

// each adds the elements of an optional list below definition level base; full
// is the level of an element that is there. A list that is not there is null.
func each[S, T any](l *levels[T], list []S, there bool, base, full int16, get func(S) T) {
	switch {
	case !there:
		l.none(base, 0)
		return
	case len(list) == 0:
		l.none(base+1, 0)
	}
	for i, v := range list {
		l.add(get(v), full, int16(min(i, 1)))
	}
}
