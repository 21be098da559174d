package main

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
	"golang.org/x/sys/unix"

	"catenrich/internal/fault"
)

// commands are all commands that a user may give, the program itself first.
func commands() []*cobra.Command {
	root := new(app).root()
	all := []*cobra.Command{root}
	for _, c := range root.Commands() {
		if c.Name() != "completion" && c.Name() != "help" { // the library's own
			all = append(all, c)
		}
	}
	return all
}

// TestHelp: every command says what it does, with an example that begins as
// one would type it, and every flag says what it is for.
func TestHelp(t *testing.T) {
	for _, c := range commands() {
		path := c.CommandPath()
		if c.Short == "" || strings.HasSuffix(c.Short, ".") || len(c.Long) < 40 && c.Name() != "version" {
			t.Errorf("%s: %q, %q", path, c.Short, c.Long)
		}
		if !strings.Contains(c.Example, "  "+path) {
			t.Errorf("%s has no example of itself: %q", path, c.Example)
		}
		c.Flags().VisitAll(func(f *pflag.Flag) {
			if f.Usage == "" || strings.HasSuffix(f.Usage, ".") {
				t.Errorf("%s --%s: %q", path, f.Name, f.Usage)
			}
		})
		for _, line := range strings.Split(c.Long, "\n") {
			if len([]rune(line)) > 90 {
				t.Errorf("%s: a line of its help is %d characters long: %s", path, len(line), line)
			}
		}
		if r := runHere(t, append(strings.Fields(path)[1:], "--help"), nil); r.code != 0 || !strings.Contains(r.stdout, "Examples:") {
			t.Errorf("%s --help: exit %d\n%s%s", path, r.code, r.stdout, r.stderr)
		}
	}
}

func TestNearestNames(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "z\n0.5\n")
	for _, c := range []struct {
		args string
		code int
		want string
	}{
		{"rnu in.csv", 64, `unknown command "rnu"; the nearest are "run"`},
		{"run in.csv --redshfit z", 64, "the nearest are --redshift"},
		{"run in.csv --redshift z --add lookbak_time -o out.csv", 64, `the nearest are "lookback_time"`},
		{"run in.csv --redshift zz --add times -o out.csv", 65, `it has "z"`},
		{"run in.csv --redshift z --add times -o out.csv --set planck", 64, `want one of "planck2018"`},
		{"columns --log-format xml", 64, "want text or json"},
	} {
		if r := runHere(t, strings.Fields(c.args), nil); r.code != c.code || !strings.Contains(r.stderr, c.want) {
			t.Errorf("%s: exit %d, want %d with %q\n%s", c.args, r.code, c.code, c.want, r.stderr)
		}
	}
}

func TestCompletion(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "id;z_a;z_b\n1;0.5;0.6\n")
	for _, c := range []struct {
		args []string
		want []string
		not  string
	}{
		{[]string{"run", "--add", ""}, []string{"distances\tgroup", "errors\tgroup", "lookback_time\t", "redshift_drift_error\t", "comoving_distance_lo\t", "v_max_main\t", "absolute_magnitude_m\t"}, "line_luminosity"},
		{[]string{"run", "--add", "times,comoving_v"}, []string{"times,comoving_volume\t", "times,comoving_volume_element\t"}, "lookback"},
		{[]string{"run", "--add", "times,tim"}, nil, "times,times"},
		{[]string{"plan", "--band", "r", "--add", "abs"}, []string{"absolute_magnitude_r\t"}, "_m\t"},
		{[]string{"run", "--set", ""}, []string{"planck2018\tPlanck 2018", "wmap9\t", "seventy-thirty\t"}, ""},
		{[]string{"run", "--frame", ""}, []string{"heliocentric", "cmb"}, ""},
		{[]string{"run", "in.csv", "--delimiter", ";", "--redshift", "z"}, []string{"z_a", "z_b"}, "id"},
		{[]string{"run", "absent.csv", "--redshift", ""}, nil, "z"},
		{[]string{"columns", "--log-format", ""}, []string{"text", "json"}, ""},
		{[]string{""}, []string{"run\t", "plan\t", "columns\t", "verify\t"}, "man\t"},
	} {
		r := mustRun(t, append([]string{"__complete"}, c.args...)...)
		for _, want := range c.want {
			if !strings.Contains("\n"+r.stdout, "\n"+want) {
				t.Errorf("%q: no %q in\n%s", c.args, want, r.stdout)
			}
		}
		if c.not != "" && strings.Contains(r.stdout, c.not) {
			t.Errorf("%q: %q is in\n%s", c.args, c.not, r.stdout)
		}
	}
	for _, shell := range []string{"bash", "zsh", "fish"} {
		if r := mustRun(t, "completion", shell); !strings.Contains(r.stdout, "__complete") {
			t.Errorf("completion %s: %q", shell, r.stdout)
		}
	}
}

// TestChoices: the job accepts what completions offer, and nothing else.
func TestChoices(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "z,ra,dec\n0.5,1,1\n")
	for flag, values := range choices {
		for _, value := range append([]string{"nonsense"}, values...) {
			command, base := "plan", "--redshift z --ra ra --dec dec --add times -o out/"
			switch flag {
			case "velocity-convention", "velocity-unit":
				base = "--velocity z --velocity-convention optical --add times -o out/"
			case "distances-in":
				base += " --frame heliocentric"
			case "header":
				base += " --comment #"
			case "limits-on":
				base += " --magnitude z --faint 19 --area 10 --selection-redshift 0,1"
			case "check":
				command = "run"
			}
			args := append([]string{command, "in.csv"}, strings.Fields(base)...)
			r := runHere(t, append(args, "--"+flag, value), nil)
			if refused := r.code == 64; refused != (value == "nonsense") && !(flag == "header" && value == "false") { // which needs names
				t.Errorf("--%s %s: exit %d\n%s", flag, value, r.code, r.stderr)
			}
			os.RemoveAll("out")
		}
	}
}

// TestExitCodes: the table in the documentation has the class of every fault.
func TestExitCodes(t *testing.T) {
	codes := map[string]bool{"0": true, "130": true, "143": true}
	for _, c := range []fault.Class{fault.Usage, fault.Data, fault.NoInput, fault.Internal, fault.CantCreate, fault.IO, fault.TryAgain, fault.Config} {
		codes[strconv.Itoa(int(c))] = true
	}
	for _, e := range exitCodes {
		if !codes[e.Code] || e.Meaning == "" {
			t.Errorf("%+v", e)
		}
		delete(codes, e.Code)
	}
	if len(codes) > 0 {
		t.Errorf("not in the table: %v", codes)
	}
}

// TestManPages: a page for each command, and roff that man(1) takes.
func TestManPages(t *testing.T) {
	dir := t.TempDir()
	mustRun(t, "man", dir)
	for _, c := range commands() {
		if c.Hidden {
			continue
		}
		path := filepath.Join(dir, manName(c)+".1")
		page := string(readFile(t, path))
		for _, part := range []string{".SH NAME", ".SH SYNOPSIS", ".SH DESCRIPTION", ".SH OPTIONS", ".SH EXAMPLES", ".SH EXIT STATUS", ".SH SEE ALSO"} {
			if strings.Count(page, part+"\n") != 1 {
				t.Errorf("%s has no %s", path, part)
			}
		}
		c.LocalFlags().VisitAll(func(f *pflag.Flag) {
			if !strings.Contains(page, `\-\-`+strings.ReplaceAll(f.Name, "-", `\-`)) {
				t.Errorf("%s lacks --%s", path, f.Name)
			}
		})
		if _, err := exec.LookPath("groff"); err != nil {
			continue
		}
		cmd := exec.Command("groff", "-man", "-ww", "-Tutf8", path)
		var complaints strings.Builder
		cmd.Stderr = &complaints
		if err := cmd.Run(); err != nil || complaints.Len() > 0 {
			t.Errorf("%s: %v\n%s", path, err, &complaints)
		}
	}
}

// TestJSONLog: with --log-format json every line on standard error is an
// object, errors and rejects among them.
func TestJSONLog(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "id,z\n1,0.5\nbroken\n2,x\n")
	for _, c := range []struct {
		args, want string
		code       int
	}{
		{"run in.csv --redshift z --add times -o out.csv --max-rejects 1", "INFO summary", 0},
		{"run in.csv --redshift z --add times -o - --max-rejects 1", `WARN in.csv:3: `, 0},
		{"run in.csv --redshift z --add times -o out2.csv", "ERROR in.csv:3: ", 65},
		{"run in.csv --redshift q --workers 0", "ERROR --workers is 0", 64},
		{"run in.csv --redshift z --add times -o out.csv --max-rejects 1 --quiet", "", 0},
	} {
		r := runHere(t, append(strings.Fields(c.args), "--log-format", "json"), nil)
		found := c.want == ""
		lines := bufio.NewScanner(strings.NewReader(r.stderr))
		for lines.Scan() {
			var entry struct{ Time, Level, Msg string }
			if err := json.Unmarshal(lines.Bytes(), &entry); err != nil || entry.Time == "" || entry.Msg == "" {
				t.Errorf("%s: %v in %s", c.args, err, lines.Text())
			}
			found = found || strings.HasPrefix(entry.Level+" "+entry.Msg, c.want)
		}
		if !found || r.code != c.code {
			t.Errorf("%s: exit %d, want %d with %q\n%s", c.args, r.code, c.code, c.want, r.stderr)
		}
	}
}

// TestSummaryIsShort: ten lines, whatever went wrong with the rows.
func TestSummaryIsShort(t *testing.T) {
	t.Chdir(t.TempDir())
	mustRun(t, "demo", "d", "--rows", "2000", "--quiet")
	r := mustRun(t, "run", "d/quill_ridge_photometry.toml", "-o", "out/")
	_, summary, ok := strings.Cut(r.stderr, "2 units: ")
	if n := strings.Count(summary, "\n"); !ok || n < 6 || n > 10 || !strings.Contains(summary, " rarer reasons") {
		t.Errorf("%d lines, want at most 10 and the rarer reasons added up:\n%s", n, summary)
	}
}

// TestProgressBar: on a terminal there is a bar; TERM=dumb and NO_COLOR turn it
// off, and nothing is coloured in any case.
func TestProgressBar(t *testing.T) {
	t.Chdir(t.TempDir())
	var rows strings.Builder
	rows.WriteString("z\n")
	for i := range 200_000 {
		fmt.Fprintf(&rows, "0.%06d\n", i)
	}
	writeFile(t, "in.csv", rows.String())
	for _, c := range []struct {
		env, value string
		bar        bool
	}{{"TERM", "xterm", true}, {"TERM", "dumb", false}, {"NO_COLOR", "1", false}} {
		t.Run(c.env+"="+c.value, func(t *testing.T) {
			t.Setenv("TERM", "xterm")
			t.Setenv("NO_COLOR", "")
			t.Setenv(c.env, c.value)
			screen, shown := terminal(t)
			var out strings.Builder
			code := run([]string{"run", "in.csv", "--redshift", "z", "--add", "all", "-o", t.TempDir() + "/out.csv"}, io.NopCloser(strings.NewReader("")), &out, screen)
			screen.Close()
			text := <-shown
			if code != 0 || strings.Contains(text, "enriching") != c.bar {
				t.Errorf("exit %d, a bar: %v, want %v\n%q", code, !c.bar, c.bar, text)
			}
			if colour := regexp.MustCompile("\x1b\\[[0-9;]*m"); colour.MatchString(text) {
				t.Errorf("something is coloured: %q", text)
			}
		})
	}
}

// terminal opens a pseudo-terminal: the end that a program writes to, and what
// was shown on it when that end is closed.
func terminal(t *testing.T) (*os.File, <-chan string) {
	t.Helper()
	master, err := os.OpenFile("/dev/ptmx", os.O_RDWR, 0)
	if err != nil {
		t.Skipf("no pseudo-terminal: %v", err)
	}
	t.Cleanup(func() { master.Close() })
	if err := unix.IoctlSetPointerInt(int(master.Fd()), unix.TIOCSPTLCK, 0); err != nil {
		t.Skipf("no pseudo-terminal: %v", err)
	}
	number, err := unix.IoctlGetInt(int(master.Fd()), unix.TIOCGPTN)
	if err != nil {
		t.Skipf("no pseudo-terminal: %v", err)
	}
	slave, err := os.OpenFile("/dev/pts/"+strconv.Itoa(number), os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Skipf("no pseudo-terminal: %v", err)
	}
	shown := make(chan string, 1)
	go func() {
		text, _ := io.ReadAll(master) // ends with EIO when the other end is closed
		shown <- string(text)
	}()
	return slave, shown
}
