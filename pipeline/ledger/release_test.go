package ledger

import (
	"bytes"
	"crypto/sha256"
	"fmt"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
)

// sampleRelease is the release of a few units like that of sample, and the text
// that Units.SHA256 is over.
func sampleRelease(t *testing.T, order []int) (*Release, string) {
	t.Helper()
	m := sample(t)
	r := &Release{ConfigHash: m.ConfigHash, Settings: m.Settings, OutputVersion: 1}
	var digest UnitsDigest
	var lines strings.Builder
	for i := range order {
		unit, self := fmt.Sprintf("field %d/a.csv", i), publish.Digest(sha256.Sum256([]byte{byte(i)}))
		digest.Add(unit, self)
		fmt.Fprintf(&lines, "%x  %s\n", self[:], unit)
	}
	for _, i := range order {
		one := sample(t)
		one.Input.Size += int64(i)
		r.Count(one)
		if err := r.Tally.Merge(&one.Tally); err != nil {
			t.Fatal(err)
		}
	}
	r.Units = digest.Units()
	return r, lines.String()
}

// TestReleaseRoundTrip: whatever the order of adding up, the same bytes, which
// read back the same; the digests by their description.
func TestReleaseRoundTrip(t *testing.T) {
	order := []int{0, 1, 2, 3, 4}
	r, lines := sampleRelease(t, order)
	text, err := EncodeRelease(r)
	if err != nil {
		t.Fatal(err)
	}
	if want := publish.Digest(sha256.Sum256([]byte(lines))); r.Units.SHA256 != want || r.Units.Count != 5 {
		t.Errorf("units %+v, want 5 with the digest %v", r.Units, want)
	}
	if want := int64(5 * 302); r.Input.Rows != want || r.Tally.Rows+r.Tally.Rejects != want || r.Sidecars.Rows != r.Tally.Rejects {
		t.Errorf("of %d rows, %+v, %+v, %d rows and %d rejects", want, r.Input, r.Sidecars, r.Tally.Rows, r.Tally.Rejects)
	}
	line := bytes.TrimSuffix(text, []byte("\n"))
	self := regexp.MustCompile(`"self":"([0-9a-f]{64})",`)
	if got := publish.Digest(sha256.Sum256(self.ReplaceAll(line, nil))); got.String() != string(self.FindSubmatch(line)[1]) {
		t.Errorf("the rest has the digest %v: %s", got, text)
	}
	back, err := ParseRelease(text)
	if err != nil {
		t.Fatal(err)
	}
	if again, err := EncodeRelease(back); err != nil || !bytes.Equal(again, text) {
		t.Errorf("read and written again (%v):\n%s, want\n%s", err, again, text)
	}
	random := rand.New(rand.NewPCG(3, 3))
	for range 5 {
		other := slices.Clone(order)
		random.Shuffle(len(other), func(i, j int) { other[i], other[j] = other[j], other[i] })
		r, _ := sampleRelease(t, other)
		if again, err := EncodeRelease(r); err != nil || !bytes.Equal(again, text) {
			t.Errorf("added up in the order %v (%v):\n%s, want\n%s", other, err, again, text)
		}
	}
}

// TestReleaseFlips changes every byte, and takes neither manifest for the other.
func TestReleaseFlips(t *testing.T) {
	r, _ := sampleRelease(t, []int{0, 1})
	text, err := EncodeRelease(r)
	if err != nil {
		t.Fatal(err)
	}
	random := rand.New(rand.NewPCG(5, 5))
	for i := range text {
		mask := byte(1 + random.IntN(255))
		text[i] ^= mask
		if _, err := ParseRelease(text); err == nil || fault.Of(err) != fault.Data || IsRelease(text) {
			t.Errorf("byte %d of %d changed by %#x: %v", i, len(text), mask, err)
		}
		text[i] ^= mask
	}
	if _, err := Parse(text); err == nil || !strings.Contains(err.Error(), "whole release") {
		t.Errorf("a release manifest read as that of an output: %v", err)
	}
	one, err := Encode(sample(t))
	if err != nil {
		t.Fatal(err)
	}
	if IsRelease(one) || IsRelease(nil) || IsRelease([]byte("{}\n")) {
		t.Error("the manifest of an output, or nothing, was taken for that of a release")
	}
}

// TestReleaseAccounts: rows or files that do not add up are refused.
func TestReleaseAccounts(t *testing.T) {
	for name, wrong := range map[string]func(*Release){
		"a unit too many":    func(r *Release) { r.Units.Count++ },
		"a row lost":         func(r *Release) { r.Output.Rows-- },
		"a reject forgotten": func(r *Release) { r.Tally.Rejects-- },
		"a cell not counted": func(r *Release) { r.Tally.Columns[0].Values-- },
	} {
		r, _ := sampleRelease(t, []int{0, 1, 2})
		wrong(r)
		if _, err := EncodeRelease(r); fault.Of(err) != fault.Internal || err == nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// TestSelfPlaces: "self" is found as a member of the outermost object alone, in
// whatever place, and never inside a text or an inner object.
func TestSelfPlaces(t *testing.T) {
	sign := func(before, after string) string { // without self it is {before,after}
		rest := "{" + strings.Trim(before+","+after, ",") + "}"
		self := fmt.Sprintf(`"self":"%x"`, sha256.Sum256([]byte(rest)))
		return "{" + strings.Trim(before+","+self+","+after, ",") + "}\n"
	}
	inner := `"a":{"self":"` + strings.Repeat("0", 64) + `"},"b":"\",\"self\":\""`
	for _, text := range []string{sign(`"a":1`, `"z":2`), sign("", `"z":2`), sign(`"a":1`, ""), sign(inner, `"z":[{"self":1}]`), sign("", inner)} {
		if _, _, err := checkSelf([]byte(text)); err != nil {
			t.Errorf("%s: %v", text, err)
		}
	}
	for _, text := range []string{"", "\n", "{}\n", "{" + inner + "}\n", `{"self":"` + "\n", strings.TrimSuffix(sign(`"a":1`, ""), "\n"), strings.ToUpper(sign(`"a":1`, "")), `"self":"` + "\n", `"\` + "\n"} {
		if _, _, err := checkSelf([]byte(text)); err == nil {
			t.Errorf("%q was believed", text)
		}
	}
}
