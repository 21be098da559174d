package columns

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// fullJob has something of every family.
const fullJob = `
columns.redshift = "z"
columns.redshift_missing = [-99]
columns.redshift_error = "zerr"
columns.quality = "q"
columns.ebv = "ebv"
redshift.quality_good = [3, 4]
redshift.valid = [-0.5, 9000]
add.columns = ["all", "errors"]
[[cosmology]]
set = "planck2018"
[[cosmology]]
suffix = "_closed"
h0 = 70
omega_m = 0.3
omega_de = 1.6
[[cosmology]]
suffix = "_eds"
h0 = 70
omega_m = 1
[[band]]
name = "r"
magnitude = "mag"
magnitude_error = "magerr"
extinction = 2.285
k_correction = { power_law = -0.5 }
solar_absolute_magnitude = 4.65
[[band]]
name = "g"
flux = "flux"
flux_unit = "nanomaggies"
[[line]]
name = "ha"
flux = "flux"
[[size]]
name = "d"
angle = "size"
[[selection]]
name = "main"
band = "r"
faint = 19.5
bright = 12
limits_on = "corrected"
area = 1200
redshift = [0.01, 0.5]
[[volume_limited]]
name = "cut"
band = "r"
brighter_than = -20
redshift = [0.01, 0.4]
`

// resolve makes a job of the text of a job file, without its input and output.
func resolve(t testing.TB, text string) *job.Job {
	t.Helper()
	f, err := job.Parse("job.toml", []byte("input.files = [\"in.csv\"]\noutput.file = \"out.csv\"\n"+text))
	if err != nil {
		t.Fatal(err)
	}
	j, err := f.Resolve(Catalog{})
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// A bench is a job bound to a batch.
type bench struct {
	*Bound
	batch   table.Batch
	scratch *Scratch
	tally   Tally
}

// bind makes a batch of rows rows with the columns that the job needs; cell
// gives each its content.
func bind(t testing.TB, text string, rows int, cell func(column string, row int, c *table.Column)) *bench {
	t.Helper()
	k := New(resolve(t, text))
	schema := &table.Schema{File: "in.csv"}
	for _, n := range k.Needs() {
		field := table.Field{Name: n.Column}
		if n.Role == job.RoleRightAscension || n.Role == job.RoleDeclination {
			field.Type = table.Float64 // degrees, not sexagesimal text
		}
		schema.Fields = append(schema.Fields, field)
	}
	// Two roles may read one column: the schema has it once.
	seen := make(map[string]bool)
	unique := schema.Fields[:0]
	for _, f := range schema.Fields {
		if !seen[f.Name] {
			seen[f.Name] = true
			unique = append(unique, f)
		}
	}
	schema.Fields = unique
	b, err := k.Bind(schema)
	if err != nil {
		t.Fatal(err)
	}
	w := &bench{Bound: b, scratch: new(Scratch), tally: k.NewTally()}
	w.batch.Reset(rows, b.Wants, k.Added())
	for i, want := range b.Wants {
		for row := range rows {
			cell(schema.Fields[want.Field].Name, row, &w.batch.In[i])
		}
	}
	return w
}

func (w *bench) run() { w.Bound.Run(&w.batch, w.scratch, w.tally) }

// column returns an added column by name.
func (w *bench) column(t testing.TB, name string) *table.Column {
	t.Helper()
	for i, f := range w.Added() {
		if f.Name == name {
			return &w.batch.Out[i]
		}
	}
	t.Fatalf("there is no column %q", name)
	return nil
}

// redshifts gives every column the same spread of redshifts, from 1e-6 to 9000.
func redshiftCell(rows int) func(string, int, *table.Column) {
	return func(_ string, row int, c *table.Column) {
		c.SetFloat(row, math.Pow(10, -6+float64(row)/float64(rows)*9.95))
	}
}

// TestIdentities holds relations between columns that are true in any model.
func TestIdentities(t *testing.T) {
	const rows, c = 5000, 299792.458 // km/s
	for name, model := range map[string]string{
		"flat": "set = \"planck2018\"", "open": "h0 = 50\nomega_m = 0.2\nomega_de = 0.1", "closed": "h0 = 90\nomega_m = 0.3\nomega_de = 0.9", "w0-wa": "h0 = 70\nomega_m = 0.3\nw0 = -0.9\nwa = 0.1",
	} {
		w := bind(t, "columns.redshift = \"z\"\nadd.columns = [\"all\"]\n[[cosmology]]\n"+model, rows, redshiftCell(rows))
		w.run()
		m := w.models[0].cells
		at := func(column string, i int) float64 { return w.column(t, column).Float[i] }
		near := func(what string, i int, got, want float64) {
			t.Helper()
			if !(math.Abs(got-want) <= 1e-13*math.Abs(want)) {
				t.Errorf("%s, z = %v: %s is %.17g, want %.17g", name, at("cosmological_redshift", i), what, got, want)
			}
		}
		for i := 0; i < rows; i += 7 {
			x := 1 + at("cosmological_redshift", i)
			dc, dm, da, dl := at("comoving_distance", i), at("transverse_comoving_distance", i), at("angular_diameter_distance", i), at("luminosity_distance", i)
			near("D_L = (1+z)^2 D_A", i, dl, x*x*da)
			near("D_M = (1+z) D_A", i, dm, x*da)
			near("emission distance", i, at("emission_distance", i), dc/x)
			if m.OmegaK() == 0 {
				near("D_M of a flat model", i, dm, dc)
			}
			if want := 5 * math.Log10(dl*1e5); !(math.Abs(at("distance_modulus", i)-want) <= 1e-13*math.Max(1, math.Abs(want))) {
				t.Errorf("%s: modulus %v, want %v", name, at("distance_modulus", i), want)
			}
			near("angular scale", i, at("angular_scale", i), da*1e3*math.Pi/648000)
			near("velocity now", i, at("recession_velocity_now", i), m.Params().H0*dc)
			near("age", i, at("age_at_emission", i)+at("lookback_time", i), m.Age())
			near("drift", i, at("velocity_drift", i), at("redshift_drift", i)/x*c*1e5)
			near("dimming", i, at("surface_brightness_dimming", i), 10*math.Log1p(at("cosmological_redshift", i))/math.Ln10)
			if now := w.column(t, "superluminal_now").Flag[i]; (now == table.True) != (at("recession_velocity_now", i) > c) {
				t.Errorf("%s: superluminal_now is %d at %v km/s", name, now, at("recession_velocity_now", i))
			}
			if i >= 7 && (dc <= at("comoving_distance", i-7) || at("lookback_time", i) <= at("lookback_time", i-7) || at("comoving_volume", i) <= at("comoving_volume", i-7)) {
				t.Errorf("%s: a distance, time or volume falls at row %d", name, i)
			}
		}
	}
}

// TestNullsAreExplained: a null cell has a bit that says why, and a row without
// bits has no null.
func TestNullsAreExplained(t *testing.T) {
	const rows = 20_000
	r := rand.New(rand.NewPCG(1, 2))
	cell := func(column string, row int, c *table.Column) {
		var v float64
		switch {
		case c.Kind == table.Bytes:
			c.Bytes[row], c.State[row] = []byte("3"), table.Good
			return
		case r.IntN(20) == 0:
			c.SetBad(row, []table.State{table.Missing, table.Malformed}[r.IntN(2)])
			return
		}
		switch column {
		case "z":
			v = []float64{-99, -1.5, -0.9, -0.3, -1e-3, 0, 1e-8, 0.05, 0.2, 0.4, 3, 1100, 8999, 9500, 2e4, 1e300}[r.IntN(16)] * (1 + r.Float64()/1e3)
			if r.IntN(30) == 0 {
				v = -99
			}
		case "q":
			v = float64(1 + r.IntN(4))
		case "zerr", "magerr", "ebv":
			v = r.Float64()/10 - 0.005
		case "flux", "size":
			v = 100 * (r.Float64() - 0.1)
		default:
			v = 10 + 12*r.Float64()
		}
		c.SetFloat(row, v)
	}
	w := bind(t, fullJob, rows, cell)
	w.run()
	bits := w.column(t, StatusName).Int
	unexplained, clean := 0, 0
	seen := int32(0)
	for row := range rows {
		seen |= bits[row]
		nulls := []string{}
		for i, f := range w.Added() {
			out := &w.batch.Out[i]
			if f.Kind == table.Float && math.IsNaN(out.Float[row]) || f.Kind == table.Flag && out.Flag[row] == table.Null {
				nulls = append(nulls, f.Name)
			}
			if f.Kind == table.Float && math.IsInf(out.Float[row], 0) {
				t.Fatalf("row %d: %s is infinite", row, f.Name)
			}
		}
		switch {
		case bits[row] == 0 && len(nulls) == 0:
			clean++
		case bits[row] == 0:
			if unexplained++; unexplained < 10 {
				t.Errorf("row %d, z = %v: %v are null, and no bit says why", row, w.batch.In[0].Float[row], nulls)
			}
		case len(nulls) == 0 && bits[row]&^status.NotPositive != 0:
			t.Errorf("row %d: bits %d (%s), and nothing is null", row, bits[row], status.String(bits[row]))
		}
		if bits[row]&(status.Missing|status.NotNumber|status.Redshift|status.Quality) != 0 && len(nulls) != len(w.Added())-1 && !rowAlone(nulls, w.Added()) {
			t.Errorf("row %d has no redshift (%s), and only %v are null", row, status.String(bits[row]), nulls)
		}
	}
	// Einstein-de Sitter has no event horizon: no row is without bit 2048.
	if seen&status.NoSuch == 0 || seen&status.Row != status.Row {
		t.Errorf("bits seen: %s; some kind of row is not tried", status.String(seen))
	}
	if got := w.tally.Rows; got != rows {
		t.Errorf("%d rows were counted of %d", got, rows)
	}
	for i, c := range w.tally.Columns {
		nulls := int64(0)
		for row := range rows {
			if out := &w.batch.Out[i]; out.Kind == table.Float && math.IsNaN(out.Float[row]) || out.Kind == table.Flag && out.Flag[row] == table.Null {
				nulls++
			}
		}
		if c.Nulls != nulls || c.Values != rows-nulls {
			t.Errorf("%s: %d nulls and %d values were counted, and %d are null", c.Name, c.Nulls, c.Values, nulls)
		}
	}
}

// rowAlone reports whether every column that depends on a redshift is null:
// extinction does not.
func rowAlone(nulls []string, added []table.Field) bool {
	null := make(map[string]bool)
	for _, name := range nulls {
		null[name] = true
	}
	for _, f := range added {
		if !null[f.Name] && f.Name != StatusName && !strings.HasPrefix(f.Name, "extinction_") {
			return false
		}
	}
	return true
}

// TestSentinels: rounded to the column's own type, then compared exactly.
func TestSentinels(t *testing.T) {
	values := []float64{-99, float64(float32(9.999)), 9.999, 0.5}
	for _, c := range []struct {
		kind table.Type
		want []int32
	}{
		{table.Untyped, []int32{1, 0, 1, 0}},
		{table.Float64, []int32{1, 0, 1, 0}},
		{table.Float32, []int32{1, 1, 0, 0}}, // a float32 column cannot hold the float64 nearest 9.999
	} {
		k := New(resolve(t, "columns.redshift = \"z\"\ncolumns.redshift_missing = [-99, 9.999]\nadd.columns = [\"lookback_time\"]\n"))
		b, err := k.Bind(&table.Schema{File: "x", Fields: []table.Field{{Name: "z", Type: c.kind}}})
		if err != nil {
			t.Fatal(err)
		}
		var batch table.Batch
		batch.Reset(len(values), b.Wants, k.Added())
		for i, v := range values {
			batch.In[0].SetFloat(i, v)
		}
		b.Run(&batch, new(Scratch), k.NewTally())
		for i, got := range batch.Out[1].Int {
			if got != c.want[i] {
				t.Errorf("%v column, %v: status %d, want %d", c.kind, values[i], got, c.want[i])
			}
		}
	}
}

// TestRunAllocatesNothing once its scratch is warm.
func TestRunAllocatesNothing(t *testing.T) {
	for name, text := range map[string]string{"twelve": twelve("flat"), "full": fullJob} {
		w := bind(t, text, 10_000, redshiftCell(10_000))
		w.run()
		if n := testing.AllocsPerRun(5, w.run); n > 0 {
			t.Errorf("%s: %v allocations a batch", name, n)
		}
	}
}

// TestBatchesDoNotDepend: a row gets the same bits in a batch of any size.
func TestBatchesDoNotDepend(t *testing.T) {
	whole := bind(t, twelve("curved"), 3*span+17, redshiftCell(3*span+17))
	whole.run()
	for _, at := range []int{0, 1, span - 1, span, 3*span + 16} {
		one := bind(t, twelve("curved"), 1, func(_ string, _ int, c *table.Column) { c.SetFloat(0, whole.batch.In[0].Float[at]) })
		one.run()
		for i, f := range one.Added() {
			if f.Kind == table.Float && one.batch.Out[i].Float[0] != whole.batch.Out[i].Float[at] {
				t.Errorf("%s of row %d: %v alone, %v in the batch", f.Name, at, one.batch.Out[i].Float[0], whole.batch.Out[i].Float[at])
			}
		}
	}
}

// twelve is the job that the speed of the kernel is measured by.
func twelve(geometry string) string {
	return `
columns.redshift = "z"
add.columns = ["comoving_distance", "transverse_comoving_distance", "angular_diameter_distance", "luminosity_distance", "distance_modulus", "angular_scale",
  "lookback_time", "age_at_emission", "comoving_volume", "comoving_volume_element", "recession_velocity_now", "recession_velocity_at_emission"]
[[cosmology]]
h0 = 70
omega_m = 0.3
` + map[string]string{"flat": "", "curved": "omega_de = 0.6\n"}[geometry]
}

// BenchmarkTwelve is one core's time for the twelve columns, from decoded
// redshifts to counted cells; without the counting it is the kernel alone. The
// time of the processor stands beside that of the clock, for machines that
// have other work.
func BenchmarkTwelve(b *testing.B) {
	const rows = 1 << 16
	for _, geometry := range []string{"flat", "curved"} {
		r := rand.New(rand.NewPCG(1, 1))
		w := bind(b, twelve(geometry), rows, func(_ string, row int, c *table.Column) { c.SetFloat(row, 3*r.Float64()) })
		measure := func(name string, run func()) {
			b.Run(geometry+"/"+name, func(b *testing.B) {
				b.ReportAllocs()
				run()
				before := processorTime(b)
				for b.Loop() {
					run()
				}
				done := float64(b.N) * rows
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/done, "ns/row")
				b.ReportMetric(float64((processorTime(b)-before).Nanoseconds())/done, "cpu-ns/row")
				b.ReportMetric(done/b.Elapsed().Seconds(), "rows/s")
			})
		}
		measure("counted", w.run)
		measure("kernel", w.computeOnly)
	}
}

// computeOnly is Run without the counting.
func (w *bench) computeOnly() {
	s, batch := w.scratch, &w.batch
	s.fit(w.Bound)
	bits := batch.Out[len(w.added)-1].Int
	clear(bits)
	for lo := 0; lo < batch.Rows; lo += span {
		hi := min(lo+span, batch.Rows)
		s.rows.Status = bits[lo:hi]
		w.redshift.fill(batch, &s.rows, lo, hi)
		s.rows.fillTerms(batch, lo, hi)
		if w.terms&errorTerm != 0 {
			s.rows.fillSigmas(w.redshift, batch, lo, hi)
		}
		if s.low != nil {
			s.fillRims(w.redshift, batch, lo, hi)
		}
		w.compute(batch, s, lo, hi)
	}
}

// processorTime is what the process has used of all cores.
func processorTime(b *testing.B) time.Duration {
	b.Helper()
	var used unix.Rusage
	if err := unix.Getrusage(unix.RUSAGE_SELF, &used); err != nil {
		b.Fatal(err)
	}
	return time.Duration(used.Utime.Nano() + used.Stime.Nano())
}
