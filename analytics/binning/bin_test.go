package binning

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

const harbourBlue = `specification: harbour-blue
title: Harbour blue, 455 nm family
kind: probe
products: [blue-455]
rejects:
  - reason: open
    when: forward_voltage_v > 4.5
  - reason: leaky
    when: reverse_current_ua > 2
  - reason: dim
    when: radiant_flux_mw < 1
axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [450, 452.5, 455, 457.5, 460]
    below: short
    above: long
  - axis: F
    quantity: radiant_flux_mw
    edges: [20, 22.5, 25, 28]
  - axis: V
    quantity: forward_voltage_v
    edges: [3.0, 3.2, 3.4, 3.6]
bins:
  name: "{W}{F}{V}"
  sellable: ["W2*", "W3*"]
`

// threeQuantities bins on three quantities, three axes and three rejects.
var threeQuantities = strings.Replace(harbourBlue, "reverse_current_ua > 2", "forward_voltage_v < 2", 1)

func mustParse(t testing.TB, document string) *Spec {
	t.Helper()
	s, err := Parse([]byte(document))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// slowRule is one reject rule of the slow reference, on float64 values.
type slowRule struct {
	reason string
	holds  func(v map[string]float64) bool
}

type slowAxis struct {
	quantity     string
	edges        []float64
	guard        float64
	below, above string
}

// slowBin is the definition of binning, die by die on floats that are multiples
// of the resolution; slack keeps float error from deciding at an edge.
func slowBin(s *Spec, rules []slowRule, axes []slowAxis, v map[string]float64) string {
	for _, q := range s.Quantities() {
		if x, ok := v[q]; !ok || math.IsNaN(x) {
			return "untested"
		}
	}
	for _, r := range rules {
		if r.holds(v) {
			return r.reason
		}
	}
	const slack = 1e-9 // far under every resolution used, far over the floats' error
	code, reject := 0, ""
	for _, a := range axes {
		x, last := v[a.quantity], len(a.edges)-1
		cell := -1
		for i := range last {
			high := x < a.edges[i+1]-a.guard-slack
			if i == last-1 {
				high = x <= a.edges[i+1]-a.guard+slack
			}
			if x >= a.edges[i]+a.guard-slack && high {
				cell = i
			}
		}
		if cell < 0 && reject == "" {
			switch {
			case x < a.edges[0]-slack:
				reject = a.below
			case x > a.edges[last]+slack:
				reject = a.above
			default:
				reject = "guard"
			}
		}
		code = code*last + max(cell, 0)
	}
	if reject != "" {
		return reject
	}
	return s.Cells()[code].Name
}

// randomPlane has values around the edges of a range, with gaps.
func randomPlane(rng *rand.Rand, name string, low, high float64, exponent, n int) wafermap.Plane {
	k := make([]int32, n)
	res := wafermap.Pow10(-exponent)
	span := (high - low) * 0.3
	for i := range k {
		k[i] = int32(math.Round((low - span + rng.Float64()*(high-low+2*span)) * res))
		if rng.IntN(40) == 0 {
			k[i] = wafermap.Missing32
		}
	}
	return wafermap.PackScaled(name, exponent, k)
}

const guardedDocument = `specification: guarded
kind: probe
rejects:
  - {reason: hot, when: "forward_voltage_v > 3.5 and radiant_flux_mw < 22 or forward_voltage_v outside [2.9, 3.7]"}
  - {reason: odd, when: "(dominant_wavelength_nm between [453, 453.5] or dominant_wavelength_nm == 456.25) and (forward_voltage_v >= 3.3 or radiant_flux_mw != 24)"}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 452.5, 455, 460], guard: 0.05}
  - {axis: F, quantity: radiant_flux_mw, edges: [20, 22.5, 28]}
bins: {sellable: all}
`

func guardedSlow() ([]slowRule, []slowAxis) {
	const slack = 1e-9
	eq := func(a, b float64) bool { return math.Abs(a-b) < slack }
	return []slowRule{
			{"hot", func(v map[string]float64) bool {
				vf, p := v["forward_voltage_v"], v["radiant_flux_mw"]
				return vf > 3.5+slack && p < 22-slack || vf < 2.9-slack || vf > 3.7+slack
			}},
			{"odd", func(v map[string]float64) bool {
				w, vf, p := v["dominant_wavelength_nm"], v["forward_voltage_v"], v["radiant_flux_mw"]
				return (w >= 453-slack && w <= 453.5+slack || eq(w, 456.25)) && (vf >= 3.3-slack || !eq(p, 24))
			}},
		}, []slowAxis{
			{"dominant_wavelength_nm", []float64{450, 452.5, 455, 460}, 0.05, "W below", "W above"},
			{"radiant_flux_mw", []float64{20, 22.5, 28}, 0, "F below", "F above"},
		}
}

func harbourSlow() ([]slowRule, []slowAxis) {
	const slack = 1e-9
	return []slowRule{
			{"open", func(v map[string]float64) bool { return v["forward_voltage_v"] > 4.5+slack }},
			{"leaky", func(v map[string]float64) bool { return v["reverse_current_ua"] > 2+slack }},
			{"dim", func(v map[string]float64) bool { return v["radiant_flux_mw"] < 1-slack }},
		}, []slowAxis{
			{"dominant_wavelength_nm", []float64{450, 452.5, 455, 457.5, 460}, 0, "short", "long"},
			{"radiant_flux_mw", []float64{20, 22.5, 25, 28}, 0, "F below", "F above"},
			{"forward_voltage_v", []float64{3.0, 3.2, 3.4, 3.6}, 0, "V below", "V above"},
		}
}

// TestBinAgreesWithTheDefinition bins random wafers by every entry and compares
// each die with the slow reference.
func TestBinAgreesWithTheDefinition(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 6))
	for _, c := range []struct {
		document string
		slow     func() ([]slowRule, []slowAxis)
	}{{harbourBlue, harbourSlow}, {guardedDocument, guardedSlow}} {
		s := mustParse(t, c.document)
		rules, axes := c.slow()
		b := s.NewBinner()
		for round := range 12 {
			n := 1 + rng.IntN(3000)
			planes := []wafermap.Plane{
				randomPlane(rng, "dominant_wavelength_nm", 449, 461, []int{-1, -2, -3}[round%3], n),
				randomPlane(rng, "radiant_flux_mw", 0.5, 30, []int{0, -1, -2}[round%3], n),
				randomPlane(rng, "forward_voltage_v", 2.8, 4.8, []int{-2, -3, -1}[round%3], n),
				randomPlane(rng, "reverse_current_ua", 0, 2.2, -3, n),
			}
			include := make([]bool, n)
			for i := range include {
				include[i] = rng.IntN(5) > 0
			}
			checkRound(t, b, rules, axes, planes, include)
		}
	}
}

func checkRound(t *testing.T, b *Binner, rules []slowRule, axes []slowAxis, planes []wafermap.Plane, include []bool) {
	t.Helper()
	s, n := b.spec, planes[0].Len()
	picked := PickPlanes(s, planes)
	dst, counts := make([]uint16, n), make([]int, len(s.Cells()))
	if err := b.Bin(dst, counts, picked, include); err != nil {
		t.Fatal(err)
	}
	want := make([]int, len(counts))
	for i, code := range dst {
		values := map[string]float64{}
		for _, p := range picked {
			values[p.Quantity] = p.Value(i)
		}
		if name := slowBin(s, rules, axes, values); name != s.Cells()[code].Name {
			t.Fatalf("%s: die %d %v: %s, by definition %s", s.Name, i, values, s.Cells()[code].Name, name)
		}
		if include[i] {
			want[code]++
		}
	}
	if !slices.Equal(counts, want) {
		t.Fatalf("%s: counts %v, want %v", s.Name, counts, want)
	}
	for name, got := range otherEntries(t, b, picked, include) {
		if !slices.Equal(got.dst, dst) || !slices.Equal(got.counts, counts) {
			t.Fatalf("%s: %s differs", s.Name, name)
		}
	}
}

type binned struct {
	dst    []uint16
	counts []int
}

// otherEntries bins the same planes as lanes, as int32 and as float64, by a
// Binner and by the Spec.
func otherEntries(t *testing.T, b *Binner, planes []*wafermap.Plane, include []bool) map[string]binned {
	t.Helper()
	n, codes := planes[0].Len(), len(b.spec.Cells())
	out := map[string]binned{}
	run := func(name string, bin func(dst []uint16, counts []int) error) {
		r := binned{make([]uint16, n), make([]int, codes)}
		if err := bin(r.dst, r.counts); err != nil {
			t.Fatal(name, err)
		}
		out[name] = r
	}
	var lanes []Lanes
	var wide, floats, mixed []*wafermap.Plane
	for i, p := range planes {
		lanes = append(lanes, lanesOf(p))
		k := make([]int32, n)
		for j, v := range p.K16 {
			if k[j] = int32(p.BaseK) + int32(v); v == wafermap.Missing16 {
				k[j] = wafermap.Missing32
			}
		}
		wide = append(wide, &wafermap.Plane{Encoding: wafermap.Int32, Exponent: p.Exponent, K32: k})
		floats = append(floats, &wafermap.Plane{Encoding: wafermap.Float64, F64: p.Floats(nil)})
		mixed = append(mixed, []*wafermap.Plane{p, wide[i], floats[i]}[i%3])
	}
	mixedLanes := slices.Clone(lanes)
	mixedLanes[0] = Lanes{Plane: floats[0]}
	run("spec", func(d []uint16, c []int) error { return b.spec.Bin(d, c, planes, include) })
	run("lanes", func(d []uint16, c []int) error { return b.BinLanes(d, c, lanes, include) })
	run("int32", func(d []uint16, c []int) error { return b.Bin(d, c, wide, include) })
	run("float64", func(d []uint16, c []int) error { return b.Bin(d, c, floats, include) })
	run("mixed", func(d []uint16, c []int) error { return b.Bin(d, c, mixed, include) })
	run("mixed lanes", func(d []uint16, c []int) error { return b.BinLanes(d, c, mixedLanes, include) })
	return out
}

func lanesOf(p *wafermap.Plane) Lanes {
	l := Lanes{BaseK: p.BaseK, Exponent: p.Exponent, Lo: make([]byte, len(p.K16)), Hi: make([]byte, len(p.K16))}
	for i, k := range p.K16 {
		l.Lo[i], l.Hi[i] = byte(k), byte(uint16(k)>>8)
	}
	return l
}

// TestEdgesAreExact puts values on edges, one resolution off them, in every
// encoding that can hold them.
func TestEdgesAreExact(t *testing.T) {
	t.Parallel()
	s := mustParse(t, `specification: edges
kind: pl
axes:
  - {axis: W, quantity: peak_wavelength_nm, edges: [452.5, 452.51, 455.1]}
`)
	for _, c := range []struct {
		exponent int
		values   []int32
		names    []string
	}{
		{-2, []int32{45249, 45250, 45251, 45510, 45511}, []string{"W below", "W1", "W2", "W2", "W above"}},
		{-3, []int32{452499, 452500, 452509, 452510, 455100, 455101}, []string{"W below", "W1", "W1", "W2", "W2", "W above"}},
		{-1, []int32{4524, 4525, 4526, 4551, 4552}, []string{"W below", "W1", "W2", "W2", "W above"}},
		{0, []int32{452, 453, 455, 456}, []string{"W below", "W2", "W2", "W above"}},
	} {
		scaled := wafermap.PackScaled("peak_wavelength_nm", c.exponent, c.values)
		float := wafermap.Plane{Encoding: wafermap.Float64, F64: scaled.Floats(nil)}
		single := wafermap.PackFloat32("", make([]float32, len(c.values)))
		for i := range single.F32 {
			single.F32[i] = float32(scaled.Value(i))
		}
		for _, p := range []*wafermap.Plane{&scaled, &float, &single} {
			dst, counts := make([]uint16, len(c.values)), make([]int, len(s.Cells()))
			if err := s.Bin(dst, counts, []*wafermap.Plane{p}, nil); err != nil {
				t.Fatal(err)
			}
			for i, code := range dst {
				if got := s.Cells()[code].Name; got != c.names[i] {
					t.Errorf("exponent %d encoding %d: %v is %s, want %s", c.exponent, p.Encoding, p.Value(i), got, c.names[i])
				}
			}
		}
	}
}

func TestMissingQuantityLeavesDiesUntested(t *testing.T) {
	t.Parallel()
	s := mustParse(t, threeQuantities)
	rng := rand.New(rand.NewPCG(7, 8))
	planes := []wafermap.Plane{randomPlane(rng, "forward_voltage_v", 3, 5, -3, 2500), randomPlane(rng, "radiant_flux_mw", 0, 30, -2, 2500)}
	dst, counts := make([]uint16, 2500), make([]int, len(s.Cells()))
	if err := s.Bin(dst, counts, PickPlanes(s, planes), nil); err != nil {
		t.Fatal(err)
	}
	last := len(counts) - 1
	if counts[last] != 2500 || slices.Min(dst) != uint16(last) || s.Cells()[last] != (Cell{Name: UntestedName, Class: Untested}) {
		t.Errorf("without a wavelength %d of 2500 dies are untested", counts[last])
	}
	if err := s.Bin(nil, counts, PickPlanes(s, planes), nil); err != nil || counts[last] != 2500 {
		t.Errorf("counting only: %v %v", counts, err)
	}
}

func TestBinRefusesUnequalLengths(t *testing.T) {
	t.Parallel()
	s := mustParse(t, threeQuantities)
	b := s.NewBinner()
	rng := rand.New(rand.NewPCG(7, 8))
	a, short := randomPlane(rng, "a", 0, 1, -2, 10), randomPlane(rng, "b", 0, 1, -2, 9)
	full := []*wafermap.Plane{&a, &a, &a}
	dst, counts := make([]uint16, 10), make([]int, len(s.Cells()))
	for name, err := range map[string]error{
		"planes":  b.Bin(dst, counts, full[:2], nil),
		"lengths": b.Bin(dst, counts, []*wafermap.Plane{&short, &a, &a}, nil),
		"later":   b.Bin(dst, counts, []*wafermap.Plane{&a, &a, &short}, nil),
		"dst":     b.Bin(dst[:9], counts, full, nil),
		"include": b.Bin(dst, counts, full, make([]bool, 11)),
		"counts":  b.Bin(dst, counts[:3], full, nil),
		"lanes":   b.BinLanes(dst, counts, []Lanes{{Lo: make([]byte, 10)}, {}, {}}, nil),
	} {
		if !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if err := b.Bin(nil, counts, []*wafermap.Plane{nil, nil, nil}, nil); err != nil {
		t.Errorf("no dies at all: %v", err)
	}
}

// TestTablesGiveWay meets more bases than a Binner keeps tables for.
func TestTablesGiveWay(t *testing.T) {
	t.Parallel()
	s := mustParse(t, "specification: a\nkind: pl\naxes: [{axis: W, quantity: q, edges: [0, 10, 20]}]\n")
	b := s.NewBinner()
	for round := range 3 * maxTables {
		p := &wafermap.Plane{Encoding: wafermap.Int16, BaseK: int64(round), K16: []int16{int16(5 - round), int16(10 - round), wafermap.Missing16}}
		dst, counts := make([]uint16, 3), make([]int, len(s.Cells()))
		if err := b.Bin(dst, counts, []*wafermap.Plane{p}, nil); err != nil || dst[0] != 0 || dst[1] != 1 || dst[2] != 4 {
			t.Fatalf("base %d: %v %v", round, dst, err)
		}
	}
}

// Counting only, out of stored lanes, must count what binning writes down, with
// and without dies that do not count.
func TestCountingOnlyCountsTheIncludedDies(t *testing.T) {
	t.Parallel()
	const dies = 5003
	s := mustParse(t, threeQuantities)
	planes := PickPlanes(s, benchWafer(dies, 3))
	var lanes []Lanes
	for _, p := range planes {
		lanes = append(lanes, lanesOf(p))
	}
	ragged := make([]bool, dies)
	for i := range ragged {
		ragged[i] = i%71 > 5 && i%13 != 0
	}
	for name, include := range map[string][]bool{"all": nil, "some": ragged, "none": make([]bool, dies)} {
		codes, want, got := make([]uint16, dies), make([]int, len(s.Cells())), make([]int, len(s.Cells()))
		if err := s.Bin(codes, want, planes, include); err != nil {
			t.Fatal(err)
		}
		if err := s.NewBinner().BinLanes(nil, got, lanes, include); err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(got, want) {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
}
