package exact

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"regexp"
	"runtime"
	"strings"
	"testing"
)

// bitsHash is the SHA-256 over results of every function.
func bitsHash() string {
	h := sha256.New()
	put := func(v float64) {
		if v != v {
			v = 0.5
		}
		binary.Write(h, binary.LittleEndian, math.Float64bits(v))
	}
	r := rand.New(rand.NewPCG(8, 9))
	for range 4000 {
		for _, f := range functions {
			put(f.ours(f.low + float64((f.high-f.low)*r.Float64())))
		}
		y, x := r.NormFloat64(), r.NormFloat64()
		put(Atan2(y, x))
		put(Pow(math.Abs(x), float64(20*y)))
	}
	return hex.EncodeToString(h.Sum(nil))
}

const childMark = "EXACT_BITS_CHILD"

// knownBits was computed on amd64; every output changes with it.
const knownBits = "4866bf76dcffbb76bf7d3f56cd325af89228c921d793c83270cb08096246b727"

// TestSameBits runs itself without fused multiply-add, and built for plain and
// for recent amd64, and compares hashes.
func TestSameBits(t *testing.T) {
	own := bitsHash()
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
	var settings []string // of other machines the hash itself is the test
	if runtime.GOARCH == "amd64" {
		settings = append(settings, "GODEBUG=cpu.fma=off", "GOAMD64=v1")
		if info, err := os.ReadFile("/proc/cpuinfo"); err == nil && hasV3(string(info)) {
			settings = append(settings, "GOAMD64=v3")
		}
	}
	for _, s := range settings {
		cmd := exec.Command("go", "test", "-count=1", "-v", "-run", "^TestSameBits$", ".")
		cmd.Env = append(os.Environ(), childMark+"=1", s)
		out, err := cmd.CombinedOutput()
		got := regexp.MustCompile(`bits: ([0-9a-f]{64})`).FindSubmatch(out)
		if err != nil || got == nil {
			t.Errorf("with %s: %v\n%s", s, err, out)
			continue
		}
		if string(got[1]) != own {
			t.Errorf("with %s the bits' hash is %s, want %s", s, got[1], own)
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
