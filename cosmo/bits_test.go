package cosmo

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"os"
	"os/exec"
	"regexp"
	"runtime"
	"strings"
	"testing"
)

// bitsHash is the SHA-256 over every quantity of every reference and extreme
// model, and its scalars: it must be the same wherever it is computed.
func bitsHash(t *testing.T) string {
	h := sha256.New()
	put := func(v float64) {
		if v != v {
			v = 0.5 // one NaN is as good as another
		}
		binary.Write(h, binary.LittleEndian, math.Float64bits(v))
	}
	z := []float64{-0.98, -0.4, -1e-3, 1e-12, 3e-7}
	for v := 1e-4; v < MaxRedshift; v *= 1.07 {
		z = append(z, v)
	}
	names := []string{"eds", "planck2018", "curved_cpl_nu", "closed_far", "cpl_a", "cpl_b", "open"}
	params := referenceParams(t)
	for _, n := range []string{"turns around at -0.5", "loitering", "barely a horizon", "phantom"} {
		names, params[n] = append(names, n), extremeParams[n]
	}
	for _, name := range names {
		m := mustNew(t, params[name])
		for _, v := range []float64{m.Age(), m.ParticleHorizon(), m.EventHorizon(), m.HubbleSphereRedshift(), m.RecessionAtEmissionRedshift(), m.EventHorizonRedshift(), m.OmegaDE(), m.OmegaNu()} {
			put(v)
		}
		var b Base
		m.Fill(&b, everything, z)
		for q := DC; q <= ContactLost; q <<= 1 {
			for _, v := range b.slice(q) {
				put(v)
			}
		}
	}
	return hex.EncodeToString(h.Sum(nil))
}

const childMark = "COSMO_BITS_CHILD"

// knownBits was computed on amd64. A change of it is a change of every
// output: raise the pipeline's outputVersion with it.
const knownBits = "bcd7ebc4fcb1a342d33f59c317650c04415363bfd87f735821d3e67a52c82d21"

// TestSameBits runs itself without fused multiply-add, and built for plain and
// for recent amd64, and compares hashes.
func TestSameBits(t *testing.T) {
	own := bitsHash(t)
	if os.Getenv(childMark) != "" {
		fmt.Println("bits:", own)
		return
	}
	if own != knownBits {
		t.Errorf("the bits' hash is %s, want %s", own, knownBits)
	}
	if testing.Short() {
		t.Skip("builds the package twice")
	}
	var settings [][]string // of other machines the hash itself is the test
	if runtime.GOARCH == "amd64" {
		settings = append(settings, []string{"GODEBUG=cpu.fma=off"}, []string{"GOAMD64=v1"})
		if info, err := os.ReadFile("/proc/cpuinfo"); err == nil && hasV3(string(info)) {
			settings = append(settings, []string{"GOAMD64=v3"})
		}
	}
	for _, s := range settings {
		cmd := exec.Command("go", "test", "-count=1", "-v", "-run", "^TestSameBits$", ".")
		cmd.Env = append(append(os.Environ(), childMark+"=1"), s...)
		out, err := cmd.CombinedOutput()
		got := regexp.MustCompile(`bits: ([0-9a-f]{64})`).FindSubmatch(out)
		if err != nil || got == nil {
			t.Errorf("with %s: %v\n%s", s[0], err, out)
			continue
		}
		if string(got[1]) != own {
			t.Errorf("with %s the bits' hash is %s, want %s", s[0], got[1], own)
		}
	}
}

// hasV3 reports whether the processor runs programs built with GOAMD64=v3.
func hasV3(info string) bool {
	for _, flag := range []string{" fma", " avx2", " bmi2", " movbe", " abm"} {
		if !strings.Contains(info, flag) {
			return false
		}
	}
	return true
}
