package main

import (
	"errors"
	"os"
	"os/exec"
	"regexp"
	"strings"
	"testing"
)

// sampleLine is a sample of the text format.
var sampleLine = regexp.MustCompile(`^([a-z_]+)\{((?:[a-z_]+="(?:[^"\\\n]|\\["\\n])*",?)*)\} ([0-9.]+)$`)

// parseMetrics checks the file's form by OpenMetrics 1.0: each family is
// declared once, before its samples, which stand together; names end in their
// unit; "# EOF" is last. It returns the samples.
func parseMetrics(t *testing.T, text string) map[string]string {
	t.Helper()
	body, ok := strings.CutSuffix(text, "# EOF\n")
	if !ok {
		t.Fatalf("no # EOF at the end of\n%s", text)
	}
	samples, seen, family := make(map[string]string), make(map[string]bool), ""
	for _, line := range strings.Split(strings.TrimSuffix(body, "\n"), "\n") {
		words := strings.SplitN(line, " ", 4)
		switch {
		case strings.HasPrefix(line, "# TYPE "):
			if family = words[2]; seen[family] || words[3] != "gauge" {
				t.Errorf("%s: declared twice, or no gauge", line)
			}
			seen[family] = true
		case strings.HasPrefix(line, "# UNIT "), strings.HasPrefix(line, "# HELP "):
			if words[2] != family || words[1] == "UNIT" && !strings.HasSuffix(family, "_"+words[3]) {
				t.Errorf("%s stands with %s", line, family)
			}
		default:
			m := sampleLine.FindStringSubmatch(line)
			if m == nil || m[1] != family {
				t.Fatalf("%q is no sample of %s", line, family)
			}
			key := m[1] + "{" + m[2] + "}"
			if _, twice := samples[key]; twice {
				t.Errorf("%s stands twice", key)
			}
			samples[key] = m[3]
		}
	}
	return samples
}

func TestMetrics(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", "id,z\n1,0.5\n2,\n3,x\n4,-0.5\nbroken\n")
	writeFile(t, "in/b.csv", "id,z\n1,0.5\n")
	writeFile(t, "night\"ly.toml", "input.files = [\"in/*.csv\"]\ncolumns.redshift = \"z\"\nadd.columns = [\"times\"]\noutput.directory = \"out\"\nlimits.max_rejects = 1\n")
	nightly := func(more ...string) (map[string]string, runResult) {
		r := runHere(t, append([]string{"run", "night\"ly.toml", "--quiet", "--metrics", "m.prom"}, more...), nil)
		text := string(readFile(t, "m.prom"))
		judgeMetrics(t, "m.prom")
		return parseMetrics(t, text), r
	}
	const job = `{job_file="night\"ly.toml"`
	samples, r := nightly()
	if r.code != 0 {
		t.Fatal(r.stderr)
	}
	for key, want := range map[string]string{
		"catenrich_run_success" + job + "}":                                                               "1",
		"catenrich_run_units" + job + `,result="written"}`:                                                "2",
		"catenrich_run_units" + job + `,result="failed"}`:                                                 "0",
		"catenrich_run_rows" + job + "}":                                                                  "5",
		"catenrich_run_rejects" + job + "}":                                                               "1",
		"catenrich_run_flagged_rows" + job + "}":                                                          "3",
		"catenrich_run_status_rows" + job + `,bit="1",reason="redshift missing"}`:                         "1",
		"catenrich_run_status_rows" + job + `,bit="2",reason="not a number"}`:                             "1",
		"catenrich_run_status_rows" + job + `,bit="8",reason="redshift not positive"}`:                    "1",
		"catenrich_run_status_rows" + job + `,bit="4096",reason="marked unusable by the quality column"}`: "0",
		"catenrich_run_input_bytes" + job + "}":                                                           "43",
	} {
		if samples[key] != want {
			t.Errorf("%s is %q, want %s", key, samples[key], want)
		}
	}
	success := samples["catenrich_run_success_timestamp_seconds"+job+"}"]
	if success == "" || success != samples["catenrich_run_end_timestamp_seconds"+job+"}"] && success > samples["catenrich_run_end_timestamp_seconds"+job+"}"] {
		t.Errorf("success at %q, end at %q", success, samples["catenrich_run_end_timestamp_seconds"+job+"}"])
	}

	// A run that cannot even begin, and one whose unit fails, say so and keep the
	// time of the last success.
	writeFile(t, "in/b.csv", "id,z\n1,\"0.5\n")
	for _, more := range [][]string{{"--workers", "0"}, {}} {
		samples, r := nightly(more...)
		if r.code == 0 || samples["catenrich_run_success"+job+"}"] != "0" || samples["catenrich_run_success_timestamp_seconds"+job+"}"] != success {
			t.Errorf("%q: exit %d, %v", more, r.code, samples)
		}
		if failed := samples["catenrich_run_units"+job+`,result="failed"}`]; len(more) == 0 && failed != "1" {
			t.Errorf("%s failed units", failed)
		}
	}

	writeFile(t, "precious.txt", "precious")
	if r := runHere(t, []string{"run", "night\"ly.toml", "--metrics", "precious.txt"}, nil); r.code != 73 || string(readFile(t, "precious.txt")) != "precious" {
		t.Errorf("exit %d, want 73\n%s", r.code, r.stderr)
	}
	if tree := listing(t, "."); strings.Contains(tree, "tmp") {
		t.Errorf("temporaries are left:\n%s", tree)
	}
}

// judgeMetrics has the file read by Prometheus' own parsers for Python, of
// both formats, where they are installed.
func judgeMetrics(t *testing.T, path string) {
	t.Helper()
	const program = `
import sys
try:
    from prometheus_client import parser, openmetrics
    from prometheus_client.openmetrics import parser as strict
except ImportError:
    sys.exit(3)
text = open(sys.argv[1]).read()
for p in (parser, strict):
    assert sum(len(f.samples) for f in p.text_string_to_metric_families(text)) > 3
`
	for _, python := range []string{"python3", "/usr/bin/python3"} { // Debian's packages are for the second
		out, err := exec.Command(python, "-c", program, path).CombinedOutput()
		if err == nil {
			return
		}
		if exit := new(exec.ExitError); errors.As(err, &exit) && exit.ExitCode() != 3 {
			t.Errorf("%s: %v\n%s", path, err, out)
			return
		}
	}
	if os.Getenv("CI") != "" {
		t.Fatal("python3-prometheus-client is not installed")
	}
	t.Log("python3-prometheus-client is not installed: only the form was checked")
}
