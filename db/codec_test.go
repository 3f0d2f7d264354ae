package db

import (
	"encoding/hex"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// samplePlanes has every encoding, with "no value" and the extremes.
func samplePlanes(n int) []wafermap.Plane {
	rng := rand.New(rand.NewPCG(1, 2))
	k16, k32 := make([]int32, n), make([]int32, n)
	f32, f64 := make([]float32, n), make([]float64, n)
	for i := range n {
		k16[i] = 45500 + int32(rng.IntN(2000)) - 1000
		k32[i] = int32(rng.Uint32()>>1) - 1<<30
		f32[i] = math.Float32frombits(rng.Uint32()&0xbfffffff | 1) // no infinity
		f64[i] = math.Float64frombits(rng.Uint64() & 0xbfffffffffffffff)
	}
	k16[0], k32[0], f32[0], f64[0] = wafermap.Missing32, wafermap.Missing32, float32(math.NaN()), math.NaN()
	f64[1], f64[2], f32[1] = math.SmallestNonzeroFloat64, -math.MaxFloat64, math.SmallestNonzeroFloat32
	return []wafermap.Plane{
		wafermap.PackScaled("peak_wavelength_nm", -2, k16),
		wafermap.PackScaled("pl_intensity", -1, k32),
		{Quantity: "fwhm_nm", Encoding: wafermap.Float32, F32: f32},
		{Quantity: "leak_a", Encoding: wafermap.Float64, F64: f64},
	}
}

func TestPlanesComeBackAsTheyWere(t *testing.T) {
	t.Parallel()
	for _, n := range []int{3, 8, 1001} { // around the eight values of Merge16
		for _, p := range samplePlanes(n) {
			s, err := EncodePlane(&p)
			if err != nil {
				t.Fatal(err)
			}
			back, err := DecodePlane(p.Quantity, s)
			if err != nil {
				t.Fatal(err)
			}
			if back.Exponent != p.Exponent || back.BaseK != p.BaseK || back.Encoding != p.Encoding {
				t.Errorf("%s: exponent %d, base %d, encoding %d; want %d, %d, %d", p.Quantity, back.Exponent, back.BaseK, back.Encoding, p.Exponent, p.BaseK, p.Encoding)
			}
			for i := range n {
				if a, b := p.Value(i), back.Value(i); math.Float64bits(a) != math.Float64bits(b) && !(math.IsNaN(a) && math.IsNaN(b)) {
					t.Fatalf("%s, die %d of %d: %v came back as %v", p.Quantity, i, n, a, b)
				}
			}
		}
	}
}

func TestDamagedPlanesAreRefused(t *testing.T) {
	t.Parallel()
	good, err := EncodePlane(&samplePlanes(100)[0])
	if err != nil {
		t.Fatal(err)
	}
	for name, spoil := range map[string]func(*StoredPlane){
		"cut":        func(s *StoredPlane) { s.Data = s.Data[:len(s.Data)-1] },
		"encoding":   func(s *StoredPlane) { s.Encoding = 9 },
		"count":      func(s *StoredPlane) { s.N = -1 },
		"resolution": func(s *StoredPlane) { s.Resolution = 0.03 },
		"base":       func(s *StoredPlane) { s.Base = math.Inf(1) },
	} {
		s := good
		spoil(&s)
		if _, err := DecodePlane("peak_wavelength_nm", s); !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: %v; want ErrInvalid", name, err)
		}
	}
}

func FuzzDecodePlane(f *testing.F) {
	for _, p := range samplePlanes(5) {
		s, err := EncodePlane(&p)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(uint8(s.Encoding), s.Base, s.Resolution, s.N, s.Data)
	}
	f.Fuzz(func(t *testing.T, encoding uint8, base, resolution float64, n int, data []byte) {
		p, err := DecodePlane("q", StoredPlane{wafermap.Encoding(encoding), base, resolution, n, data})
		if err != nil {
			return
		}
		again, err := EncodePlane(&p)
		if err != nil || hex.EncodeToString(again.Data) != hex.EncodeToString(data) {
			t.Fatalf("%v: what was read does not write the same bytes", err)
		}
	})
}

func BenchmarkDecodePlane(b *testing.B) {
	s, err := EncodePlane(&samplePlanes(50_000)[0])
	if err != nil {
		b.Fatal(err)
	}
	b.SetBytes(int64(len(s.Data)))
	b.ReportAllocs()
	for b.Loop() {
		if _, err := DecodePlane("q", s); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkEncodePlane(b *testing.B) {
	p := samplePlanes(50_000)[0]
	b.SetBytes(2 * 50_000)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := EncodePlane(&p); err != nil {
			b.Fatal(err)
		}
	}
}
