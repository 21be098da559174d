package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// reportPages makes the reports that are worth a look, and returns their files
// by name: the demo, the demo with photometry, an open catalogue, and a night
// in which half the redshifts are off by 1 % and a tenth are missing, against
// the night before.
func reportPages(t *testing.T) map[string]string {
	t.Helper()
	packed := readFile(t, filepath.Join(cataloguesDir, "nebulae-and-galaxies.csv.gz"))
	dir := t.TempDir()
	t.Chdir(dir)
	mustRun(t, "demo", "qr", "--quiet")
	writeFile(t, "nebulae-and-galaxies.csv.gz", string(packed))
	mustRun(t, "run", "nebulae-and-galaxies.csv.gz", "--delimiter", ";", "--redshift", "Redshift", "--add", "distances,times,recession", "-o", "open/", "--quiet")
	brokenNight(t)
	return map[string]string{
		"demo":       filepath.Join(dir, "qr", "enriched", "report.html"),
		"photometry": filepath.Join(dir, "qr", "enriched_photometry", "report.html"),
		"open":       filepath.Join(dir, "open", "report.html"),
		"broken":     filepath.Join(dir, "broken", "enriched_photometry", "report.html"),
	}
}

// brokenNight runs the photometric job of the demo on its catalogue, in
// night/, and on the same with broken redshifts, in broken/, against the first.
func brokenNight(t *testing.T) {
	t.Helper()
	job := strings.Replace(string(readFile(t, "qr/quill_ridge_photometry.toml")), `, "quill_ridge_wide.parquet"`, "", 1)
	catalogue := string(readFile(t, "qr/quill_ridge.csv"))
	for _, night := range []string{"night", "broken"} {
		for path, text := range readTree(t, "qr/templates") {
			writeFile(t, filepath.Join(night, "templates", path), string(text))
		}
		writeFile(t, filepath.Join(night, "job.toml"), job)
	}
	writeFile(t, "night/quill_ridge.csv", catalogue)
	writeFile(t, "broken/quill_ridge.csv", breakRedshifts(t, catalogue))
	mustRun(t, "run", "night/job.toml", "--quiet")
	mustRun(t, "run", "broken/job.toml", "--quiet", "--previous", "night/enriched_photometry")
}

// breakRedshifts makes every second redshift larger by 1 % and empties every
// tenth.
func breakRedshifts(t *testing.T, catalogue string) string {
	lines := strings.Split(catalogue, "\n")
	header := strings.Split(lines[0], ",")
	at := -1
	for i, name := range header {
		if name == "z_best" {
			at = i
		}
	}
	if at < 0 {
		t.Fatal("the demo has no column z_best")
	}
	for i, line := range lines[1:] {
		fields := strings.Split(line, ",")
		if len(fields) != len(header) {
			continue
		}
		z, err := strconv.ParseFloat(fields[at], 64)
		switch {
		case err != nil || z <= 0:
			continue
		case i%10 == 3:
			fields[at] = ""
		case i%2 == 0:
			fields[at] = strconv.FormatFloat(z*1.01, 'f', 6, 64)
		}
		lines[i+1] = strings.Join(fields, ",")
	}
	return strings.Join(lines, "\n")
}

// TestBrokenNight: the page says what happened, in its first lines.
func TestBrokenNight(t *testing.T) {
	if testing.Short() {
		t.Skip("enriches the demo four times")
	}
	t.Chdir(t.TempDir())
	mustRun(t, "demo", "qr", "--quiet")
	brokenNight(t)
	page := string(readFile(t, "broken/enriched_photometry/report.html"))
	top, _, _ := strings.Cut(page, "What was checked")
	for _, want := range []string{"Do not hand over", "of the rows have no redshift, 7.1\u00a0% last time", "changed redshift", "the mean redshift is"} {
		if !strings.Contains(top, want) {
			t.Errorf("the top of the page does not say %q", want)
		}
	}
	r := mustRun(t, "report", "night/enriched_photometry", "--previous", "night/enriched_photometry", "-o", "-")
	if !strings.Contains(r.stdout, "the same, bin for bin") {
		t.Error("a release compared with itself is not the same, bin for bin")
	}
}

// TestReportFiles: where the report goes, what it leaves alone, and that it is
// the same from run and from report.
func TestReportFiles(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", "id,z\n1,0.5\n2,0.7\n")
	args := []string{"run", "in/a.csv", "--redshift", "z", "--add", "distances", "--quiet"}
	mustRun(t, append(args, "-o", "out/")...)
	page := readFile(t, "out/report.html")
	mustRun(t, "report", "out")
	if !bytes.Equal(readFile(t, "out/report.html"), page) {
		t.Error("run and report make different pages")
	}
	mustRun(t, "report", "out/a.csv", "-o", "page.html")
	if !bytes.Equal(readFile(t, "page.html"), page) {
		t.Error("the report of a directory and of its only output differ")
	}
	mustRun(t, "report", "out/a.csv.manifest.json")
	if !bytes.Equal(readFile(t, "out/a.csv.report.html"), page) {
		t.Error("the report of a manifest differs")
	}

	if r := mustRun(t, append(args, "-o", "single.csv")...); len(readTree(t, ".")) != 13 {
		t.Errorf("one named output comes without a report, and there are\n%s%s", listing(t, "."), r.stderr)
	}
	mustRun(t, append(args, "-o", "none/", "--no-report")...)
	if _, err := os.Stat("none/report.html"); err == nil {
		t.Error("--no-report made a report")
	}

	// The outputs and their report are inputs of nobody.
	mustRun(t, "run", "out/**/*", "--format", "csv", "--redshift", "z", "--add", "distances", "--prefix", "p_", "-o", "again/", "--quiet")
	if tree := readTree(t, "again"); tree["report.html"] == nil || bytes.Contains(tree["report.html"], []byte("a.csv.report.html")) {
		t.Error("a report was taken for a catalogue")
	}
}

// TestForeignReport: a file that is not our report stays, and nothing is begun.
func TestForeignReport(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", "id,z\n1,0.5\n")
	writeFile(t, "out/report.html", "mine")
	args := []string{"run", "in/a.csv", "--redshift", "z", "--add", "distances", "-o", "out/", "--quiet"}
	r := runHere(t, args, nil)
	if r.code != 73 || !strings.Contains(r.stderr, "out/report.html exists and was not written by catenrich") || string(readFile(t, "out/report.html")) != "mine" || len(readTree(t, "out")) != 1 {
		t.Errorf("exit %d, want 73 and nothing changed\n%s%s", r.code, r.stderr, listing(t, "out"))
	}
	mustRun(t, append(args, "--no-report")...)
	if string(readFile(t, "out/report.html")) != "mine" {
		t.Error("--no-report touched somebody's file")
	}
	mustRun(t, append(args, "--replace")...)
	if !strings.Contains(string(readFile(t, "out/report.html")), "Fit to hand over") {
		t.Error("--replace did not write the report")
	}

	// One that was ours and was changed is somebody's now.
	writeFile(t, "out/report.html", strings.Replace(string(readFile(t, "out/report.html")), "Fit", "Unfit", 1))
	if r := runHere(t, args, nil); r.code != 73 {
		t.Errorf("a changed report was replaced (exit %d)", r.code)
	}
}

// TestReportGoesFirst: no report stands beside outputs that it does not speak
// of: it is gone before the first output changes, and says so if a unit fails.
func TestReportGoesFirst(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", "id,z\n1,0.5\n")
	args := []string{"run", "in/a.csv", "--redshift", "z", "--add", "distances", "-o", "out/", "--quiet"}
	mustRun(t, args...)
	writeFile(t, "in/a.csv", "id,z\n1,0.5\n2,0.6\n")
	mustRun(t, append(args, "--no-report")...)
	if _, err := os.Stat("out/report.html"); err == nil {
		t.Error("the report of the earlier outputs is still there")
	}
	mustRun(t, args...)
	writeFile(t, "in/a.csv", "id,other\n1,0.5\n")
	if r := runHere(t, args, nil); r.code != 65 {
		t.Fatalf("exit %d, want 65\n%s", r.code, r.stderr)
	}
	if page := string(readFile(t, "out/report.html")); !strings.Contains(page, "Do not hand over") || !strings.Contains(page, "the run could not finish it") {
		t.Error("the report of a run that failed does not say so")
	}
}
