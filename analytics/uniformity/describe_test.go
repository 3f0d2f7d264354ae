package uniformity

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"
)

func TestDescribeCountsMissing(t *testing.T) {
	t.Parallel()
	s := Describe([]float64{1, math.NaN(), 3, math.Inf(1), 2}, 2)
	if s.N != 3 || s.Missing != 2 || s.Mean != 2 || s.SD != 1 || s.Median != 2 || s.Min != 1 || s.Max != 3 || s.Within1 != 1 {
		t.Errorf("%+v", s)
	}
	for _, values := range [][]float64{nil, {math.NaN()}} {
		s := Describe(values, 1)
		if s.N != 0 || !math.IsNaN(s.Mean+s.SD) || !math.IsNaN(s.Min) || !math.IsNaN(s.RobustSD) || !math.IsNaN(s.Within1) || len(s.Histogram.Counts) != 0 {
			t.Errorf("no values: %+v", s)
		}
	}
	if s := Describe([]float64{7}, math.NaN()); s.Mean != 7 || !math.IsNaN(s.SD) || s.RobustSD != 0 || s.Q99 != 7 || !math.IsNaN(s.Target) {
		t.Errorf("one value: %+v", s)
	}
}

// Type 7 by hand: rank (n − 1)p from 0 of 1, 2, 4, 8 is 0.75 for p = 0.25, hence
// 1 + 0.75·(2 − 1).
func TestQuantileIsType7(t *testing.T) {
	t.Parallel()
	v := []float64{1, 2, 4, 8}
	for p, want := range map[float64]float64{0: 1, 0.25: 1.75, 0.5: 3, 0.75: 5, 1: 8} {
		if got := Quantile(v, p); got != want {
			t.Errorf("p = %g: %g, want %g", p, got, want)
		}
	}
	for _, p := range []float64{-0.1, 1.1, math.NaN()} {
		if got := Quantile(v, p); !math.IsNaN(got) {
			t.Errorf("p = %g: %g", p, got)
		}
	}
}

func TestSortFloatsAgreesWithTheLibrary(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(1, 1))
	for _, n := range []int{0, 1, 511, 512, 5000} {
		v := make([]float64, n)
		for i := range v {
			v[i] = []float64{rng.NormFloat64() * 1e-300, rng.NormFloat64(), -rng.Float64() * 1e300, 0, float64(rng.IntN(9))}[rng.IntN(5)]
		}
		want := slices.Clone(v)
		slices.Sort(want)
		sortFloats(v, nil)
		if !slices.Equal(v, want) {
			t.Errorf("%d values are not in order", n)
		}
	}
}

// TestSortedMAD holds the outward walk to the definition.
func TestSortedMAD(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(2, 2))
	for n := 1; n < 60; n++ {
		v := make([]float64, n)
		for i := range v {
			v[i] = float64(rng.IntN(20))
		}
		slices.Sort(v)
		median := Quantile(v, 0.5)
		d := make([]float64, n)
		for i := range v {
			d[i] = math.Abs(v[i] - median)
		}
		slices.Sort(d)
		if got, want := sortedMAD(v, median), Quantile(d, 0.5); got != want {
			t.Fatalf("%v: %g, want %g", v, got, want)
		}
	}
}

func TestHistogramOfHardValues(t *testing.T) {
	t.Parallel()
	for name, v := range map[string][]float64{
		"all alike": {5, 5, 5}, "all zero": {0, 0}, "huge": {-1.7e308, 1.7e308}, "tiny": {1e-310, 2e-310, 3e-310},
		"far from zero": {1e15, 1e15 + 1, 1e15 + 2}, "one outlier": append(make([]float64, 5000), 1e9), "negative": {-3.14, -2.72, -1},
	} {
		h := Describe(v, math.NaN()).Histogram
		total := h.Below + h.Above
		for _, n := range h.Counts {
			total += n
		}
		if len(h.Counts) > 0 && (total != len(v) || !(h.Width > 0)) || len(h.Counts) > maxCells+2 {
			t.Errorf("%s: %d of %d values, %d cells of %g", name, total, len(v), len(h.Counts), h.Width)
		}
	}
}

func TestSummaryJSON(t *testing.T) {
	t.Parallel()
	full := Describe([]float64{1, 2, 3.5}, 2)
	full.Excluded, full.Implausible = 4, 5
	full.Radial = []RadialBin{{InnerMM: 0, OuterMM: 2.5, N: 1, Mean: 2, SD: math.NaN()}}
	for name, s := range map[string]Summary{"full": full, "empty": Describe(nil, math.NaN())} {
		b, err := json.Marshal(&s)
		if err != nil {
			t.Fatal(err)
		}
		if strings.Contains(string(b), "NaN") {
			t.Errorf("%s: %s", name, b)
		}
		var back Summary
		if err := json.Unmarshal(b, &back); err != nil {
			t.Fatal(err)
		}
		again, err := json.Marshal(back)
		if err != nil || string(again) != string(b) {
			t.Errorf("%s: came back as %s, was %s (%v)", name, again, b, err)
		}
		checkKeys(t, b)
	}
	var s Summary
	if err := json.Unmarshal([]byte(`{"n": 2}`), &s); err != nil || !math.IsNaN(s.Mean) || !math.IsNaN(s.Histogram.Low) {
		t.Errorf("absent keys are not NaN: %+v %v", s, err)
	}
	if err := json.Unmarshal([]byte(`{"mean": "x"}`), &s); err == nil {
		t.Error("text was read as a mean")
	}
}

// checkKeys holds the written keys to the tags of the types.
func checkKeys(t *testing.T, b []byte) {
	t.Helper()
	var keys map[string]json.RawMessage
	if err := json.Unmarshal(b, &keys); err != nil {
		t.Fatal(err)
	}
	typ := reflect.TypeFor[Summary]()
	for i := range typ.NumField() {
		if key := typ.Field(i).Tag.Get("json"); keys[key] == nil {
			t.Errorf("key %q is not written", key)
		}
	}
	if len(keys) != typ.NumField() {
		t.Errorf("%d keys for %d fields", len(keys), typ.NumField())
	}
}

func TestColourState(t *testing.T) {
	t.Parallel()
	// values centred on c with one in each 0.1 nm from −spread to +spread
	around := func(c, spread float64) []float64 {
		var v []float64
		for d := -spread; d <= spread+1e-9; d += 0.1 {
			v = append(v, c+d)
		}
		return v
	}
	twoHumps := append(around(451, 0.5), append([]float64{455}, around(459, 0.5)...)...)
	for _, c := range []struct {
		name   string
		values []float64
		target float64
		window float64
		want   string
	}{
		{"centred", around(455, 1), 455, 1.5, OnColour},
		{"near the border", around(456.4, 0.3), 455, 1.5, OnColour},
		{"below", around(452, 1), 455, 1.5, Short},
		{"above", around(458, 1), 455, 1.5, Long},
		{"two humps", twoHumps, 455, 1.5, Mixed},
		{"two humps, exact share", twoHumps, 455, 2, Mixed},
		{"wide", around(455, 8), 455, 1.5, Mixed},
		{"no values", nil, 455, 1.5, Unmeasured},
		{"no target", around(455, 1), math.NaN(), 1.5, ""},
		{"no window", around(455, 1), 455, math.NaN(), ""},
	} {
		if got := ColourState(Describe(c.values, c.target), c.window); got != c.want {
			t.Errorf("%s: %q, want %q", c.name, got, c.want)
		}
	}
}

// TestShareWithin holds the share read off the histogram to the exact one.
func TestShareWithin(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 3))
	v := make([]float64, 4000)
	for i := range v {
		v[i] = 455 + 2*rng.NormFloat64()
	}
	s := Describe(v, 455.3)
	const tolerance = 0.01 // a histogram of some 40 cells over ±3 sd, its tails of 0.1 % each unread
	for _, window := range []float64{0.5, 1.5, 3, 100} {
		n := 0
		for _, x := range v {
			if math.Abs(x-455.3) <= window {
				n++
			}
		}
		if got, want := shareWithin(s, window), float64(n)/float64(len(v)); math.Abs(got-want) > tolerance {
			t.Errorf("±%g: %g, counted %g", window, got, want)
		}
	}
}

func BenchmarkDescribe(b *testing.B) {
	rng := rand.New(rand.NewPCG(4, 4))
	v := make([]float64, 50_000)
	for i := range v {
		v[i] = 455 + rng.NormFloat64()
	}
	b.ReportAllocs()
	for b.Loop() {
		Describe(v, 455)
	}
	b.ReportMetric(float64(len(v))*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mvalues/s")
}
