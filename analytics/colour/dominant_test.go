package colour

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"epitally/analytics"
	"epitally/testdata/sharedtest"
)

// checkFile is a file of published checks.
type checkFile struct {
	Cases []struct {
		ID, Op, Source string
		Input          json.RawMessage
		Expect, Tol    map[string]any
	}
}

// eachCheck runs the cases of one operation of a file of published checks; solve
// gives the results by their keys.
func eachCheck(t *testing.T, file, op string, solve func(t *testing.T, input json.RawMessage) map[string]float64) {
	t.Helper()
	var f checkFile
	if err := json.Unmarshal(sharedtest.Read(t, "reference/checks/"+file), &f); err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, c := range f.Cases {
		if c.Op != op {
			continue
		}
		n++
		got := solve(t, c.Input)
		for key, want := range c.Expect {
			w, ok := want.(float64)
			if b, is := want.(bool); is {
				ok = true
				if w = 0; b {
					w = 1
				}
			}
			g, have := got[key]
			if !ok || !have {
				t.Errorf("%s: %s, %v, is not held against anything", c.ID, key, want)
				continue
			}
			if tol := toleranceOf(c.Tol, key, w); !(math.Abs(g-w) <= tol) {
				t.Errorf("%s (%s): %s %.8g, want %.8g ± %.2g", c.ID, c.Source, key, g, w, tol)
			}
		}
	}
	if n == 0 {
		t.Errorf("%s has no case of %s", file, op)
	}
}

// toleranceOf reads a tolerance: a number is absolute; {rel, abs} the larger.
func toleranceOf(tol map[string]any, key string, want float64) float64 {
	v, ok := tol[key]
	if !ok {
		v = tol["default"]
	}
	switch v := v.(type) {
	case float64:
		return v
	case map[string]any:
		out := 0.0
		if r, ok := v["rel"].(float64); ok {
			out = r * math.Abs(want)
		}
		if a, ok := v["abs"].(float64); ok {
			out = max(out, a)
		}
		return out
	}
	return 0
}

func truth(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

func TestDominantWavelengthChecks(t *testing.T) {
	t.Parallel()
	eachCheck(t, "colour_dominant.json", "dominant_wavelength", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			X, Y  float64
			White struct{ XY [2]float64 }
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		d, err := DominantOf(XY{in.X, in.Y}, XY{in.White.XY[0], in.White.XY[1]})
		if err != nil {
			t.Fatal(err)
		}
		return map[string]float64{"wavelength_nm": d.WavelengthNM, "complementary": truth(d.Complementary), "excitation_purity": d.ExcitationPurity,
			"boundary_x": d.Boundary.X, "boundary_y": d.Boundary.Y}
	})
}

// Monochromatic light is its own dominant wavelength with purity 1 (CIE 15).
// Beyond 699 nm all light has one chromaticity within 10⁻⁵.
func TestMonochromaticLightIsItsOwn(t *testing.T) {
	t.Parallel()
	for _, white := range []XY{WhiteE, WhiteD65, WhiteA} {
		for nm := 380.0; nm <= 690; nm += 0.5 {
			d, err := DominantOf(Locus(nm), white)
			if err != nil {
				t.Fatal(err)
			}
			tolerance := 1e-6
			if nm < 410 || nm > 670 {
				tolerance = 1 // the tabulated locus has five to seven digits and hardly moves here
			}
			if d.Complementary || math.Abs(d.WavelengthNM-nm) > tolerance || math.Abs(d.ExcitationPurity-1) > 1e-4 {
				t.Errorf("%g nm against (%.3f, %.3f): %+v", nm, white.X, white.Y, d)
			}
		}
	}
}

func TestComplementaryWavelengths(t *testing.T) {
	t.Parallel()
	// A purple on the way from E to the middle of the purple line; its complement
	// is on the line's other side.
	a, b := Locus(400), Locus(690)
	middle := XY{(a.X + b.X) / 2, (a.Y + b.Y) / 2}
	p := XY{(middle.X + WhiteE.X) / 2, (middle.Y + WhiteE.Y) / 2}
	d, err := DominantOf(p, WhiteE)
	if err != nil {
		t.Fatal(err)
	}
	if !d.Complementary || math.Abs(d.ExcitationPurity-0.5) > 0.002 || math.Abs(d.Boundary.X-middle.X) > 0.002 {
		t.Errorf("%+v", d)
	}
	opposite := Locus(d.WavelengthNM)
	if c := cross(opposite.X-WhiteE.X, opposite.Y-WhiteE.Y, p.X-WhiteE.X, p.Y-WhiteE.Y); math.Abs(c) > 1e-4 {
		t.Errorf("%g nm is not opposite: %g", d.WavelengthNM, c)
	}
}

func TestDominantRefuses(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name     string
		p, white XY
		meaning  bool
	}{
		{"y is 0", XY{0.3, 0}, WhiteE, false},
		{"not a number", XY{math.NaN(), 0.3}, WhiteE, false},
		{"infinite", XY{math.Inf(1), 0.3}, WhiteE, false},
		{"outside the locus", XY{0.05, 0.1}, WhiteE, false},
		{"over the top", XY{0.6, 0.6}, WhiteE, false},
		{"white itself", WhiteE, WhiteE, true},
		{"next to white", XY{0.3340, 0.3333}, WhiteE, true},
		{"white on the locus", XY{0.3, 0.3}, Locus(520), false},
		{"white outside", XY{0.3, 0.3}, XY{0.05, 0.05}, false},
		{"white is no chromaticity", XY{0.3, 0.3}, XY{0.8, 0.8}, false},
	} {
		_, err := DominantOf(c.p, c.white)
		if !errors.Is(err, analytics.ErrInvalid) || errors.Is(err, ErrNotMeaningful) != c.meaning {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}

// TestTableIsTheDirectComputation holds the fast way against DominantOf.
func TestTableIsTheDirectComputation(t *testing.T) {
	t.Parallel()
	const tolerance = 1e-6 // nm; far under the 0.005 nm that is asked for
	for _, white := range []XY{WhiteE, WhiteD65, {0.25, 0.3}} {
		table, err := NewDominantTable(white)
		if err != nil {
			t.Fatal(err)
		}
		rng := rand.New(rand.NewPCG(8, 8))
		const n = 4000
		x, y, got, purity := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range x {
			x[i], y[i] = 0.75*rng.Float64(), 0.85*rng.Float64()
		}
		x[0], y[1] = math.NaN(), math.NaN()
		x[2], y[2] = white.X, white.Y
		table.Wavelengths(got, purity, x, y)
		compared := 0
		for i := range x {
			d, err := DominantOf(XY{x[i], y[i]}, white)
			if err != nil {
				if !math.IsNaN(got[i]) && y[i] > 0 && x[i]+y[i] <= 1 {
					t.Errorf("(%g, %g): %g where %v", x[i], y[i], got[i], err)
				}
				continue
			}
			want := d.WavelengthNM
			if d.Complementary {
				want = -want
			}
			compared++
			if math.Abs(got[i]-want) > tolerance || math.Abs(purity[i]-d.ExcitationPurity) > 1e-9 {
				t.Fatalf("(%g, %g): %g nm, purity %g; want %g, %g", x[i], y[i], got[i], purity[i], want, d.ExcitationPurity)
			}
		}
		if compared < n/4 {
			t.Errorf("only %d points were compared", compared)
		}
	}
}

func BenchmarkDominantTable(b *testing.B) {
	table, err := NewDominantTable(WhiteE)
	if err != nil {
		b.Fatal(err)
	}
	const n = 50_000
	rng := rand.New(rand.NewPCG(1, 1))
	x, y, dst, purity := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range x { // a blue wafer: 445 to 465 nm at purities from 0.95 on
		p, s := Locus(445+20*rng.Float64()), 0.95+0.05*rng.Float64()
		x[i], y[i] = WhiteE.X+s*(p.X-WhiteE.X), WhiteE.Y+s*(p.Y-WhiteE.Y)
	}
	b.ReportAllocs()
	for b.Loop() {
		table.Wavelengths(dst, purity, x, y)
	}
	b.ReportMetric(float64(n)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}
