package ledger

import (
	"crypto/sha256"
	"encoding/json"
	"testing"

	"github.com/gowebpki/jcs"

	"catenrich/internal/publish"
)

// sign makes any JSON object a manifest whose "self" is right, so that mutated
// text gets past the digest; nil if it is none.
func sign(text []byte) []byte {
	var members map[string]json.RawMessage
	if json.Unmarshal(text, &members) != nil || members == nil {
		return nil
	}
	if settings, err := jcs.Transform(members["settings"]); err == nil {
		members["config_hash"], _ = json.Marshal(publish.Digest(sha256.Sum256(settings)))
	}
	delete(members, "self")
	rest, err := canonical(members)
	if err != nil {
		return nil
	}
	members["self"], _ = json.Marshal(publish.Digest(sha256.Sum256(rest)))
	whole, err := canonical(members)
	if err != nil {
		return nil
	}
	return append(whole, '\n')
}

// FuzzParse: a manifest that somebody signed may say anything; what is believed
// can be merged and written again, and reads the same then.
func FuzzParse(f *testing.F) {
	t := new(testing.T)
	text, err := Encode(sample(t))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(text)
	f.Add([]byte(`{"settings":{},"tally":{"columns":[null],"sums":{"a":null}}}`))
	f.Add([]byte(`{"settings":{},"tally":{"status":{"1":3},"columns":[{"name":"a","sum":{"count":1,"exact":"-0x1p+1087"}}],"histograms":{"h":{"axes":[{"name":"x","scale":"binary","first":-7,"end":3}],"cells":[[-8,5],[3,1]]}}}}`))
	f.Fuzz(func(t *testing.T, text []byte) {
		if m, err := Parse(text); err == nil {
			useParsed(t, m)
		}
		if m, err := Parse(sign(text)); err == nil {
			useParsed(t, m)
		}
	})
}

func useParsed(t *testing.T, m *Manifest) {
	text, err := Encode(m)
	if err != nil {
		t.Fatalf("read, and not written again: %v", err)
	}
	again, err := Parse(text)
	if err != nil {
		t.Fatalf("written, and not read again: %v\n%s", err, text)
	}
	sum := new(Tally)
	if err := sum.Merge(&again.Tally); err != nil {
		t.Fatal(err)
	}
	if err := sum.Merge(&m.Tally); err != nil {
		t.Fatal(err)
	}
}
