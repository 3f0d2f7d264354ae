package wafermap

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
)

func TestPackScaledReturnsTheDecimalText(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(1, 2))
	for _, exponent := range []int{-6, -3, -2, -1, 0, 1, 3} {
		for _, c := range []struct{ centre, span int64 }{
			{0, 10}, {45_237, 900}, {45_237, 65_534}, {45_237, 65_535}, {-2_000_000, 40_000}, {0, 4_000_000_000}, {90_000, 60_000},
		} {
			k := make([]int32, 500)
			for i := range k {
				v := c.centre - c.span/2 + rng.Int64N(c.span+1)
				k[i] = int32(max(math.MinInt32+1, min(math.MaxInt32, v)))
			}
			k[7] = Missing32
			want := append([]int32(nil), k...)
			checkRoundTrip(t, PackScaled("q", exponent, k), exponent, want)
		}
	}
}

// checkRoundTrip compares Plane.Value with strconv's nearest float64 of the
// decimal text, bit for bit.
func checkRoundTrip(t *testing.T, p Plane, exponent int, k []int32) {
	t.Helper()
	if err := p.Validate(); err != nil {
		t.Fatal(err)
	}
	for i, v := range k {
		got := p.Value(i)
		if v == Missing32 {
			if !math.IsNaN(got) {
				t.Fatalf("die %d: %g for no value", i, got)
			}
			continue
		}
		text := fmt.Sprintf("%de%d", v, exponent)
		if want, _ := strconv.ParseFloat(text, 64); got != want {
			t.Fatalf("encoding %d base %d: %s came back %v", p.Encoding, p.BaseK, text, got)
		}
	}
}

func TestPackScaledChoosesTheNarrowestEncoding(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name string
		k    []int32
		want Encoding
		base int64
	}{
		{"no value", []int32{Missing32, Missing32}, Int16, 0},
		{"near zero", []int32{3500, 3512}, Int16, 0},
		{"wavelength", []int32{45_237, 45_801, Missing32}, Int16, 50_000}, // mid-range 45,519, to the nearest 10,000
		{"whole width", []int32{100_000, 165_534}, Int16, 132_767},
		{"negative whole width", []int32{-165_534, -100_000}, Int16, -132_767},
		{"one over", []int32{100_000, 165_535}, Int32, 0},
		{"extremes", []int32{math.MinInt32 + 1, math.MaxInt32}, Int32, 0},
	} {
		p := PackScaled("q", -2, append([]int32(nil), c.k...))
		if p.Encoding != c.want || p.BaseK != c.base {
			t.Errorf("%s: encoding %d base %d, want %d and %d", c.name, p.Encoding, p.BaseK, c.want, c.base)
		}
		checkRoundTrip(t, p, -2, c.k)
	}
}

func TestPackWide(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name string
		k    []int64
		want Encoding
	}{
		{"narrow far from zero", []int64{9_000_000_000, 9_000_000_100, MissingWide}, Int16},
		{"int32 about a base", []int64{9_000_000_000, 9_000_100_000}, Int32},
		{"too wide", []int64{-9_000_000_000, 9_000_000_000, MissingWide}, Float64},
		{"no value", []int64{MissingWide}, Int16},
	} {
		p := PackWide("q", -3, c.k)
		if p.Encoding != c.want {
			t.Errorf("%s: encoding %d, want %d", c.name, p.Encoding, c.want)
		}
		for i, k := range c.k {
			want, _ := strconv.ParseFloat(fmt.Sprintf("%de-3", k), 64)
			if got := p.Value(i); got != want && !(k == MissingWide && math.IsNaN(got)) {
				t.Errorf("%s: %d came back %v", c.name, k, got)
			}
		}
	}
}

func TestPackFloat64KeepsEveryBit(t *testing.T) {
	t.Parallel()
	if p := PackFloat64("q", []float64{1.5, math.NaN(), -0.25}); p.Encoding != Float32 || p.Value(0) != 1.5 || !math.IsNaN(p.Value(1)) {
		t.Errorf("binary32 values: encoding %d", p.Encoding)
	}
	if p := PackFloat64("q", []float64{1.5, 0.1}); p.Encoding != Float64 || p.Value(1) != 0.1 {
		t.Errorf("binary64 values: encoding %d", p.Encoding)
	}
}

func BenchmarkPackScaled(b *testing.B) {
	b.ReportAllocs()
	k := make([]int32, 1_000_000)
	for i := range k {
		k[i] = int32(45_000 + i%700)
	}
	b.SetBytes(int64(len(k)))
	for b.Loop() {
		PackScaled("q", -2, k)
	}
}
