package main

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// sharedJob is a job of a dozen units of very different sizes.
func sharedJob(t *testing.T) {
	t.Helper()
	t.Chdir(t.TempDir())
	for i := range 12 {
		writeFile(t, fmt.Sprintf("in/field %d/%c.csv", i%3, 'a'+i), catalogue(5+i*i*20, uint64(i)))
	}
	writeFile(t, "job.toml", strings.Replace(propertyJob, "in/*.csv", "in/**/*.csv", 1))
}

// refused runs the program and wants the exit code.
func refused(t *testing.T, code int, args ...string) runResult {
	t.Helper()
	r := runHere(t, args, strings.NewReader(""))
	if r.code != code {
		t.Fatalf("%v: exit %d, want %d\n%s%s", args, r.code, code, r.stdout, r.stderr)
	}
	return r
}

// TestGather: shares in any order and number, repeated, and a gathering give
// the same bytes as one run, release manifest and report included.
func TestGather(t *testing.T) {
	sharedJob(t)
	mustRun(t, "run", "job.toml", "--quiet", "-o", "whole/")
	want := published(t, "whole")
	if want[ledger.ReleaseName] == nil || want["report.html"] == nil {
		t.Fatalf("a run leaves\n%s", listing(t, "whole"))
	}
	for _, n := range []int{1, 3, 20} {
		os.RemoveAll("out")
		for i := n; i >= 1; i-- {
			for range 2 {
				mustRun(t, "run", "job.toml", "--quiet", "--share", fmt.Sprintf("%d/%d", i, n))
			}
			if tree := readTree(t, "."); tree["out/"+ledger.ReleaseName] != nil || tree["out/report.html"] != nil {
				t.Fatalf("share %d/%d ended the release", i, n)
			}
		}
		for _, check := range []string{"quick", "full"} {
			mustRun(t, "gather", "job.toml", "--quiet", "--check", check)
			sameTrees(t, fmt.Sprintf("%d shares, --check=%s", n, check), published(t, "out"), want)
		}
	}
	r, err := ledger.ParseRelease(want[ledger.ReleaseName])
	if err != nil {
		t.Fatal(err)
	}
	var digest ledger.UnitsDigest
	rows := int64(0)
	for _, unit := range planUnits(t, "job.toml") {
		m := readManifest(t, filepath.Join("whole", unit))
		digest.Add(unit, m.Self)
		rows += m.Tally.Rows
	}
	if r.Units != digest.Units() || r.Tally.Rows != rows || r.Output.Files != 12 {
		t.Errorf("the release has %+v and %d rows, its units %+v and %d", r.Units, r.Tally.Rows, digest.Units(), rows)
	}
	// Neither the program's other commands nor a pattern take it for an output.
	mustRun(t, "verify", "whole", "--rows", "20")
	mustRun(t, "report", "whole", "-o", "again.html")
	if !bytes.Equal(readFile(t, "again.html"), want["report.html"]) {
		t.Error("report makes another page of the directory than run")
	}
	refused(t, 65, "report", "whole/"+ledger.ReleaseName)
}

// planUnits lists the ids of a job's units.
func planUnits(t *testing.T, job string) (ids []string) {
	t.Helper()
	for _, line := range strings.Split(mustRun(t, "plan", job, "--json").stdout, "\n") {
		if id, ok := strings.CutPrefix(strings.TrimSpace(line), `"id": "`); ok {
			ids = append(ids, strings.TrimSuffix(id, `",`))
		}
	}
	return ids
}

// TestGatherUndone: whatever is wrong with a unit is said, with the shares that
// mend it; nothing is written; and the same run again mends it.
func TestGatherUndone(t *testing.T) {
	sharedJob(t)
	mustRun(t, "run", "job.toml", "--quiet")
	want := published(t, "out")
	const unit = "field 1/h.csv"
	out := filepath.Join("out", unit)
	flip := func(path string) {
		text := readFile(t, path)
		text[len(text)/2] ^= 1
		writeFile(t, path, string(text))
	}
	for _, c := range []struct {
		name, reason string
		check        string
		harm         func()
	}{
		{"no output", "is missing", "quick", func() { os.Remove(out) }},
		{"nothing", "is missing", "quick", func() { os.Remove(out); os.Remove(publish.ManifestPath(out)) }},
		{"a damaged manifest", "damaged", "quick", func() { flip(publish.ManifestPath(out)) }},
		{"a changed output", "is not what its manifest describes", "full", func() { flip(out) }},
		{"a sidecar gone", "a sidecar is not", "quick", func() { os.Remove(out + ".columns.csv") }},
		{"another job", "another job", "quick", func() { mustRun(t, "run", "job.toml", "--quiet", "--prefix", "p_") }},
		{"a pending manifest of another output", "has no manifest", "quick", func() {
			os.Rename(publish.ManifestPath(out), publish.PendingPath(out))
			writeFile(t, out, "id,z\n")
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			c.harm()
			before := published(t, "out")[ledger.ReleaseName] // of the other job, if that was the harm
			r := refused(t, 75, "gather", "job.toml", "--shares", "4", "--check", c.check)
			if !strings.Contains(r.stdout, unit+"\t") || !strings.Contains(r.stdout, c.reason) {
				t.Errorf("it says\n%s, want %s and %q", r.stdout, unit, c.reason)
			}
			if !strings.Contains(r.stderr, "catenrich run job.toml --share ") || !strings.Contains(r.stderr, "of 12 units") {
				t.Errorf("it says\n%s", r.stderr)
			}
			if now := published(t, "out")[ledger.ReleaseName]; now != nil && !bytes.Equal(now, before) {
				t.Error("a release manifest was written")
			}
			mustRun(t, "run", "job.toml", "--quiet", "--check=full", "--replace")
			sameTrees(t, c.name, published(t, "out"), want)
		})
	}
}

// TestGatherRecovers: a publication that was interrupted behind its output is
// brought to its end.
func TestGatherRecovers(t *testing.T) {
	sharedJob(t)
	mustRun(t, "run", "job.toml", "--quiet")
	want := published(t, "out")
	out := filepath.Join("out", "field 0/a.csv")
	if err := os.Rename(publish.ManifestPath(out), publish.PendingPath(out)); err != nil {
		t.Fatal(err)
	}
	r := mustRun(t, "gather", "job.toml")
	if !strings.Contains(r.stderr, "1 interrupted publication") {
		t.Errorf("it says\n%s", r.stderr)
	}
	sameTrees(t, "recovered", published(t, "out"), want)
}

// TestReleaseRetracted: a release manifest never stands beside outputs that it
// does not describe, nor in the place of a file that is not ours.
func TestReleaseRetracted(t *testing.T) {
	sharedJob(t)
	mustRun(t, "run", "job.toml", "--quiet")
	writeFile(t, "in/field 0/a.csv", "id,z,note\n1,0.5,new\n")
	mustRun(t, "run", "job.toml", "--quiet", "--share", "1/1")
	if tree := published(t, "out"); tree[ledger.ReleaseName] != nil || tree["report.html"] != nil {
		t.Error("a share changed an output, and the old release stands")
	}
	writeFile(t, "in/field 0/broken.csv", "id,z,note\n1,\"0.5,new\n")
	refused(t, 65, "run", "job.toml", "--quiet")
	if tree := published(t, "out"); tree[ledger.ReleaseName] != nil {
		t.Error("a unit failed, and a release manifest was written")
	}
	os.Remove("in/field 0/broken.csv")
	writeFile(t, filepath.Join("out", ledger.ReleaseName), "mine\n")
	refused(t, 73, "gather", "job.toml")
	refused(t, 73, "run", "job.toml", "--quiet")
	if string(readFile(t, filepath.Join("out", ledger.ReleaseName))) != "mine\n" {
		t.Error("a file that is not ours was replaced")
	}
	mustRun(t, "run", "job.toml", "--quiet", "--replace")
	writeFile(t, "in/release", "id,z,note\n1,0.5,new\n")
	if r := refused(t, 78, "run", "in/release", "--format", "csv", "--redshift", "z", "--add", "times", "-o", "out/"); !strings.Contains(r.stderr, "release manifest") {
		t.Errorf("it says\n%s", r.stderr)
	}
}

// TestShareFlags: what is no share, and what cannot be gathered.
func TestShareFlags(t *testing.T) {
	sharedJob(t)
	for _, share := range []string{"0/3", "4/3", "1", "1/", "/3", "a/b", "-1/3", "1/0", "1/100001", "1/2/3"} {
		refused(t, 64, "run", "job.toml", "--share", share)
	}
	refused(t, 64, "plan", "job.toml", "--shares", "-1")
	refused(t, 64, "gather", "job.toml", "--shares", "100001")
	refused(t, 78, "gather", "in/field 0/a.csv", "--redshift", "z", "--add", "times", "-o", "one.csv")
	refused(t, 78, "gather", "-", "--redshift", "z", "--add", "times", "-o", "out/")
	r := mustRun(t, "plan", "job.toml", "--shares", "5")
	if strings.Count(r.stdout, "/5 ") != 5 || !strings.Contains(r.stdout, "balance: a fair share is") || !strings.Contains(r.stdout, "one unit alone") {
		t.Errorf("plan says\n%s", r.stdout)
	}
}

// TestCommandQuoted: the command that gather names is one for a shell.
func TestCommandQuoted(t *testing.T) {
	for word, want := range map[string]string{"a.csv": "a.csv", "": "''", "in/field 0/a.csv": "'in/field 0/a.csv'", "it's": `'it'\''s'`, "*": "'*'", "-99": "-99", "a$b": "'a$b'"} {
		if got := quoted(word); got != want {
			t.Errorf("%q is quoted %s, want %s", word, got, want)
		}
	}
}
