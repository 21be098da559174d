package demo

import (
	"strconv"
	"strings"
)

// The columns of the catalogue, in order.
const (
	colID = iota
	colField
	colRA
	colDec
	colZSpec
	colZSpecErr
	colZPhot
	colZBest
	colZErr
	colZLower
	colZUpper
	colZFlag
	colCompleteness
	colEBV
	colEBVErr
	colMagG
	colMagErrG
	colMagR
	colMagErrR
	colFluxI
	colIvarI
	colKG
	colTemplate
	colSNR
	colRemarks
	columnCount
)

var columnNames = [columnCount]string{
	"object_id", "field", "ra", "dec", "z_spec", "z_spec_err", "z_phot", "z_best", "z_err", "z_lower", "z_upper", "zflag",
	"completeness", "ebv", "ebv_err", "mag_g", "magerr_g", "mag_r", "magerr_r", "flux_i", "ivar_i", "k_g", "template", "snr", "remarks",
}

// A value is what stands in one cell: a number, or a text. The empty text is a
// missing value.
type value struct {
	number float64
	text   string
	isText bool
}

func number(v float64) value { return value{number: v} }
func text(s string) value    { return value{text: s, isText: true} }

var missing = text("")

// A record is one row of the catalogue.
type record [columnCount]value

// appendTo writes the record as a line of RFC 4180 CSV. Numbers are the
// shortest text that reads back the same.
func (r *record) appendTo(b []byte) []byte {
	for i := range r {
		if i > 0 {
			b = append(b, ',')
		}
		if v := &r[i]; v.isText {
			b = appendQuoted(b, v.text)
		} else {
			b = strconv.AppendFloat(b, v.number, 'f', -1, 64)
		}
	}
	return append(b, '\n')
}

func appendQuoted(b []byte, s string) []byte {
	if !strings.ContainsAny(s, ",\"\n\r") {
		return append(b, s...)
	}
	b = append(b, '"')
	b = append(b, strings.ReplaceAll(s, `"`, `""`)...)
	return append(b, '"')
}

// appendBroken writes the record as its defect has it: cut off in the middle,
// or with more fields than the header.
func (r *record) appendBroken(b []byte, defect string) []byte {
	if defect == longRecord {
		r[colRemarks] = missing
		b = r.appendTo(b)
		return append(b[:len(b)-1], "faint, edge of plate, see the log\n"...)
	}
	start := len(b)
	b = r.appendTo(b)
	fields := 0
	for i, c := range b[start:] {
		if c != ',' {
			continue
		}
		if fields++; fields == colZFlag {
			return append(b[:start+i], '\n')
		}
	}
	return b
}

// remarks are what the observers wrote, sometimes.
var remarks = []string{
	"close pair, deblended by eye",
	`"blue" nucleus?`,
	"edge of plate",
	"Ångström-scale fringe, re-observe",
	"halo of a bright star, σ underestimated",
	"nice spiral ☆",
	"two nights:\nthe second was better",
	`logged as "A, B" on the slit list`,
	"tidal tail; see companion",
	"no remark, really",
}
