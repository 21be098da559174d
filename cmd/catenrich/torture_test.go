package main

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
)

// TestTortureCells takes every spelling of a redshift that is none, or nearly
// none, through the program: the row is kept as it stands, the status says why,
// and the output is proven afterwards, every row by the direct path.
func TestTortureCells(t *testing.T) {
	cells := []struct {
		text   string
		status string // of science: 1 missing, 2 not a number, 4 1+z not positive, 8 not positive, 16 out of range
	}{
		{"0.1", "0"}, {"+0.3", "0"}, {"  0.2 ", "0"}, {"1D-1", "0"}, {"1.5d+0", "0"}, {".5", "0"}, {"5.", "0"}, {"1e-300", "0"}, {"5e-324", "0"}, {"9999.9", "0"},
		{"", "1"}, {"   ", "1"}, {"NaN", "1"}, {"nan", "1"}, {"-nan", "1"}, {"-99", "1"}, {"-99.0", "1"}, {"-9.9e1", "1"}, {"-9.9D1", "1"}, {"-99.9000015258789", "0+4"}, {"-99.9", "1"},
		{"Inf", "2"}, {"-inf", "2"}, {"+Infinity", "2"}, {"1e400", "2"}, {"0x1p3", "2"}, {"1_000", "2"}, {"--1", "2"}, {"1e", "2"}, {"1,5", "reject"}, {"null", "2"}, {"\\N", "2"},
		{"\x00", "2"}, {"0.1\x00", "2"}, {"\xff\xfe", "2"}, {"é", "2"}, {"\u0661", "2"}, {strings.Repeat("9", 400), "2"}, {strings.Repeat("0", 400) + "1", "0"},
		{"0", "8"}, {"-0", "8"}, {"-0.0", "8"}, {"1e-400", "8"}, {"-0.5", "8"}, {"-1e-300", "8"}, {"-1", "4"}, {"-7", "4"}, {"-1e300", "4"}, {"1e300", "16"}, {"10001", "16"}, {"-0.995", "8+16"},
	}
	var in strings.Builder
	in.WriteString("n,z,after\n")
	for i, c := range cells {
		fmt.Fprintf(&in, "%d,%s,kept\n", i, c.text)
	}
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", in.String())
	mustRun(t, "run", "in.csv", "--redshift", "z", "--redshift-missing", "-99,-99.9", "--add", "distances,times,volumes,recession", "--set", "seventy-thirty",
		"--max-rejects", "1", "-o", "out.csv", "--quiet")
	lines := bytes.Split(bytes.TrimSuffix(readFile(t, "out.csv"), []byte("\n")), []byte("\n"))[1:]
	for i, c := range cells {
		if c.status == "reject" {
			continue
		}
		record := fmt.Sprintf("%d,%s,kept", i, c.text)
		if !bytes.HasPrefix(lines[0], []byte(record+",")) {
			t.Fatalf("the record %q became %q", record, lines[0])
		}
		fields := bytes.Split(lines[0], []byte(","))
		var bits, got int
		for _, s := range strings.Split(c.status, "+") {
			var bit int
			fmt.Sscan(s, &bit)
			bits |= bit
		}
		fmt.Sscan(string(fields[len(fields)-1]), &got)
		if got != bits {
			t.Errorf("z = %.40q: status %d, want %d", c.text, got, bits)
		}
		lines = lines[1:]
	}
	if r := runHere(t, []string{"verify", "out.csv", "--all", "--input", "in.csv"}, nil); r.code != 0 {
		t.Errorf("verify: exit %d\n%s%s", r.code, r.stdout, r.stderr)
	}
}

// TestTortureShapes takes odd texts through the program. Each is either copied
// record by record and proven, or refused with the class and the words given.
func TestTortureShapes(t *testing.T) {
	wide := strings.Repeat("c,", 5000) // one name, five thousand times
	for name, c := range map[string]struct {
		text string
		args []string
		code int
		says string // of standard error
		rows int
	}{
		"thousands of columns":       {"z," + wide + "last\n0.5," + strings.Repeat("1,", 5000) + "x\n", nil, 0, "", 1},
		"the redshift twice":         {"z,z\n0.1,0.2\n", nil, 65, "more than once", 0},
		"other names twice":          {"a,a,z\n1,2,0.3\n", nil, 0, "", 1},
		"a name that would be added": {"z,Lookback_Time\n0.1,2\n", nil, 78, "already has a column", 0},
		"carriage returns alone":     {"id,z\r1,0.1\r2,0.2\r", nil, 0, "", 2},
		"mixed line ends":            {"id,z\r\n1,0.1\n2,0.2\r\n3,0.3", nil, 0, "", 3},
		"a field of 64 MiB":          {"z,blob\n0.1," + strings.Repeat("x", 64<<20) + "\n0.2,y\n", nil, 0, "", 2},
		"NUL bytes all over":         {"z,a\x00b\n0.1,\x00\x00\n0.2,\n", nil, 0, "", 2},
		"names in another encoding":  {"z,caf\xe9\n0.1,\xe9\xff\n", nil, 0, "", 1},
		"only missing redshifts":     {"id,z\n1,\n2,NaN\n", nil, 0, "", 2},
		"a sentinel in every cell":   {"id,z\n1,-1\n2,-1\n", []string{"--redshift-missing", "-1"}, 0, "", 2},
		"nothing but words":          {"id,z\n1,low\n2,high\n", nil, 65, "holds no numbers", 0},
	} {
		t.Run(name, func(t *testing.T) {
			if testing.Short() && len(c.text) > 1<<20 {
				t.Skip("64 MiB")
			}
			t.Chdir(t.TempDir())
			writeFile(t, "in.csv", c.text)
			r := runHere(t, append([]string{"run", "in.csv", "--redshift", "z", "--add", "lookback_time", "--set", "seventy-thirty", "-o", "out.csv", "--quiet"}, c.args...), nil)
			if r.code != c.code || !strings.Contains(r.stderr, c.says) {
				t.Fatalf("exit %d, want %d and %q\n%.500s", r.code, c.code, c.says, r.stderr)
			}
			if c.code != 0 {
				return
			}
			proof := runHere(t, []string{"verify", "out.csv", "--all", "--input", "in.csv"}, nil)
			if proof.code != 0 || !strings.Contains(proof.stdout, fmt.Sprintf("its accounts of %d rows", c.rows)) {
				t.Errorf("verify: exit %d, want %d rows\n%.500s%.500s", proof.code, c.rows, proof.stdout, proof.stderr)
			}
		})
	}
}
