package status

import "testing"

// The numbers are public: they stand in every catalogue written so far.
func TestNumbersStay(t *testing.T) {
	for _, c := range []struct {
		name string
		got  int32
		want int32
	}{
		{"Missing", Missing, 1}, {"NotNumber", NotNumber, 2}, {"Redshift", Redshift, 4},
		{"NotPositive", NotPositive, 8}, {"Range", Range, 16}, {"Magnitude", Magnitude, 32},
		{"Error", Error, 64}, {"Position", Position, 128}, {"Coverage", Coverage, 256},
		{"Selection", Selection, 512}, {"Flux", Flux, 1024}, {"NoSuch", NoSuch, 2048},
		{"Quality", Quality, 4096}, {"Quantiles", Quantiles, 8192}, {"Input", Input, 16384},
		{"Row", Row, 1 | 2 | 4 | 8 | 16 | 4096},
	} {
		if c.got != c.want {
			t.Errorf("%s = %d, want %d", c.name, c.got, c.want)
		}
	}
	if Count != 15 {
		t.Errorf("Count = %d, want 15", Count)
	}
}

func TestString(t *testing.T) {
	if got := String(0); got != "" {
		t.Errorf("String(0) = %q, want nothing", got)
	}
	want := "redshift not positive; flux not positive"
	if got := String(NotPositive | Flux); got != want {
		t.Errorf("String(8|1024) = %q, want %q", got, want)
	}
}
