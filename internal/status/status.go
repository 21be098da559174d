// Package status names the bits of the enrich_status column. They are public:
// a bit's number never changes its meaning. Every package that leaves a cell
// null says why by or-ing a bit into the row's status.
package status

import "strings"

// The bits. Missing, NotNumber, Redshift, NotPositive, Range and Quality
// describe the row, whatever columns are asked for; the others are set by a
// requested cell that is null because of them.
const (
	Missing     int32 = 1 << iota // redshift missing
	NotNumber                     // not a number: text, or infinite
	Redshift                      // 1+z is not positive or not finite
	NotPositive                   // redshift zero or negative
	Range                         // outside the model's range, or the job's valid range
	Magnitude                     // magnitude or flux missing
	Error                         // an error missing or negative
	Position                      // position missing or out of range
	Coverage                      // outside a K table or the SED
	Selection                     // outside the selection
	Flux                          // flux not positive
	NoSuch                        // no such quantity in this model
	Quality                       // marked unusable by the survey's own quality column
	Quantiles                     // quantiles missing, reversed or not around z
	Input                         // another needed input missing
)

// Row is the set of bits that describe a row whatever columns are asked for.
const Row = Missing | NotNumber | Redshift | NotPositive | Range | Quality

// descriptions are in bit order, in the words of the column's documentation.
var descriptions = [...]string{
	"redshift missing",
	"not a number",
	"1+z not positive or not finite",
	"redshift not positive",
	"outside the model's range or the valid range",
	"magnitude missing",
	"an error missing or negative",
	"position missing or out of range",
	"outside the K table or the SED",
	"outside the selection",
	"flux not positive",
	"no such quantity in this model",
	"marked unusable by the quality column",
	"quantiles missing, reversed or not around the redshift",
	"another needed input missing",
}

// Count is the number of bits in use.
const Count = len(descriptions)

// Describe returns the meaning of bit number i, from 0 to Count-1.
func Describe(i int) string { return descriptions[i] }

// String describes every bit set in s, in bit order, joined by "; ". A row
// without a fault, and bits without a meaning, give nothing.
func String(s int32) string {
	var b strings.Builder
	for i, d := range descriptions {
		if s&(1<<i) == 0 {
			continue
		}
		if b.Len() > 0 {
			b.WriteString("; ")
		}
		b.WriteString(d)
	}
	return b.String()
}
