package binning

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"epitally/analytics/wafermap"
)

// benchWafer has the shape of real values: smooth over the wafer, a little noise.
func benchWafer(n int, seed uint64) []wafermap.Plane {
	rng := rand.New(rand.NewPCG(seed, 1))
	side := int(math.Sqrt(float64(n)))
	make16 := func(name string, exponent int, centre, bowl, noise float64) wafermap.Plane {
		k := make([]int32, n)
		for i := range k {
			x, y := float64(i%side)/float64(side)-0.5, float64(i/side)/float64(side)-0.5
			k[i] = int32(math.Round((centre + bowl*4*(x*x+y*y) + noise*rng.NormFloat64()) * wafermap.Pow10(-exponent)))
			if rng.IntN(60) == 0 {
				k[i] = wafermap.Missing32
			}
		}
		return wafermap.PackScaled(name, exponent, k)
	}
	return []wafermap.Plane{
		make16("dominant_wavelength_nm", -2, 453, 4, 0.3), make16("radiant_flux_mw", -2, 24, -2, 0.6), make16("forward_voltage_v", -3, 3.25, 0.1, 0.03),
	}
}

func benchmark(b *testing.B, bin func(binner *Binner, planes []*wafermap.Plane, lanes []Lanes, dst []uint16, counts []int, include []bool) error) {
	const dies = 50_000
	s := mustParse(b, threeQuantities)
	planes := PickPlanes(s, benchWafer(dies, 1))
	var lanes []Lanes
	for _, p := range planes {
		lanes = append(lanes, lanesOf(p))
	}
	include := make([]bool, dies)
	for i := range include {
		include[i] = i%200 > 3
	}
	dst, counts, binner := make([]uint16, dies), make([]int, len(s.Cells())), s.NewBinner()
	b.ReportAllocs()
	for b.Loop() {
		if err := bin(binner, planes, lanes, dst, counts, include); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(dies)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}

func BenchmarkBin(b *testing.B) {
	benchmark(b, func(binner *Binner, p []*wafermap.Plane, _ []Lanes, dst []uint16, counts []int, include []bool) error {
		return binner.Bin(dst, counts, p, include)
	})
}

func BenchmarkBinLanes(b *testing.B) {
	benchmark(b, func(binner *Binner, _ []*wafermap.Plane, l []Lanes, dst []uint16, counts []int, include []bool) error {
		return binner.BinLanes(dst, counts, l, include)
	})
}

func BenchmarkBinLanesCountOnly(b *testing.B) {
	benchmark(b, func(binner *Binner, _ []*wafermap.Plane, l []Lanes, _ []uint16, counts []int, _ []bool) error {
		return binner.BinLanes(nil, counts, l, nil)
	})
}

// BenchmarkBinNewTables has a base the Binner has not met in every call.
func BenchmarkBinNewTables(b *testing.B) {
	benchmark(b, func(binner *Binner, _ []*wafermap.Plane, l []Lanes, dst []uint16, counts []int, include []bool) error {
		for i := range binner.tables {
			binner.tables[i] = binner.tables[i][:0]
		}
		return binner.BinLanes(dst, counts, l, include)
	})
}

// whiteWafer has chromaticities about the middle of manyPolygons.
func whiteWafer(n int) []wafermap.Plane {
	rng := rand.New(rand.NewPCG(4, 1))
	side := int(math.Sqrt(float64(n)))
	var planes []wafermap.Plane
	for axis, name := range []string{"cie_x", "cie_y"} {
		k := make([]int32, n)
		for i := range k {
			r := float64(i%side)/float64(side) - 0.5
			if axis == 1 {
				r = float64(i/side)/float64(side) - 0.5
			}
			k[i] = int32(math.Round((0.385 + 0.1*r + 0.01*rng.NormFloat64()) * 1e5))
			if rng.IntN(60) == 0 {
				k[i] = wafermap.Missing32
			}
		}
		planes = append(planes, wafermap.PackScaled(name, -5, k))
	}
	return planes
}

// BenchmarkBinPolygons bins into 200 chromaticity polygons.
func BenchmarkBinPolygons(b *testing.B) {
	const dies = 50_000
	s := mustParse(b, manyPolygons(20, 10, ""))
	planes := PickPlanes(s, whiteWafer(dies))
	dst, counts, binner := make([]uint16, dies), make([]int, len(s.Cells())), s.NewBinner()
	b.ReportAllocs()
	for b.Loop() {
		if err := binner.Bin(dst, counts, planes, nil); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(dies)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}

// BenchmarkParsePolygons is what every step of an edit pays before it bins.
func BenchmarkParsePolygons(b *testing.B) {
	document := []byte(manyPolygons(20, 10, ""))
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Parse(document); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkConformityPolygons works out the risks of 200 polygons.
func BenchmarkConformityPolygons(b *testing.B) {
	const dies = 50_000
	s := mustParse(b, strings.Replace(manyPolygons(20, 10, ""), "kind: probe", "kind: probe\nuncertainty: {cie_x: 0.0005, cie_y: 0.0005}", 1))
	planes := PickPlanes(s, whiteWafer(dies))
	codes, counts := make([]uint16, dies), make([]int, len(s.Cells()))
	if err := s.Bin(codes, counts, planes, nil); err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := s.Conformity(codes, planes, nil, nil, 0.95); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(dies)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}

// BenchmarkConformityAxes works out the risks of three axes whose cells are about
// ten standard uncertainties wide.
func BenchmarkConformityAxes(b *testing.B) {
	const dies = 50_000
	s := mustParse(b, strings.Replace(threeQuantities, "kind: probe", "kind: probe\nuncertainty: {dominant_wavelength_nm: 0.12, radiant_flux_mw: 0.3, forward_voltage_v: 0.004}", 1))
	planes := PickPlanes(s, benchWafer(dies, 1))
	codes, counts := make([]uint16, dies), make([]int, len(s.Cells()))
	if err := s.Bin(codes, counts, planes, nil); err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := s.Conformity(codes, planes, nil, nil, Confidence); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(dies)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}
