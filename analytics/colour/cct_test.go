package colour

import (
	"encoding/json"
	"errors"
	"math"
	"testing"
)

func TestCCTChecks(t *testing.T) {
	t.Parallel()
	point := func(t *testing.T, input json.RawMessage) (p struct{ X, Y float64 }) {
		if err := json.Unmarshal(input, &p); err != nil {
			t.Fatal(err)
		}
		return p
	}
	eachCheck(t, "colour_cct.json", "cct_duv", func(t *testing.T, input json.RawMessage) map[string]float64 {
		p := point(t, input)
		c, err := CCTOf(XY{p.X, p.Y})
		if err != nil {
			t.Fatal(err)
		}
		return map[string]float64{"cct_K": c.K, "duv": c.Duv}
	})
	eachCheck(t, "colour_cct.json", "xy_from_cct_duv", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			K   float64 `json:"cct_K"`
			Duv float64 `json:"duv"`
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		p, err := XYFromCCT(CCT(in))
		if err != nil {
			t.Fatal(err)
		}
		return map[string]float64{"x": p.X, "y": p.Y}
	})
	eachCheck(t, "colour_cct.json", "xy_to_uprime_vprime", func(t *testing.T, input json.RawMessage) map[string]float64 {
		p := point(t, input)
		q := XY{p.X, p.Y}.UV()
		back := q.XY()
		if math.Abs(back.X-p.X) > 1e-14 || math.Abs(back.Y-p.Y) > 1e-14 {
			t.Errorf("(%g, %g) comes back as %+v", p.X, p.Y, back)
		}
		return map[string]float64{"u_prime": q.U, "v_prime": q.V}
	})
}

// TestCCTAgainstDirectMinimisation looks for the nearest point of the locus by
// golden sections, without any table.
func TestCCTAgainstDirectMinimisation(t *testing.T) {
	t.Parallel()
	const toleranceK, toleranceDuv = 0.1, 1e-6 // under 20,000 K
	for _, kelvin := range []float64{1200, 2000, 2856, 3500, 5000, 6504, 9000, 15000, 19000} {
		for _, duv := range []float64{-0.03, -0.006, -0.0019, 0, 0.001, 0.0021, 0.01, 0.04} {
			p, err := XYFromCCT(CCT{kelvin, duv})
			if err != nil && kelvin < 3000 && duv > 0.002 {
				continue // above the locus there is hardly any room for low temperatures
			}
			if err != nil {
				t.Fatal(err)
			}
			c, err := CCTOf(p)
			if err != nil {
				t.Fatalf("%g K %g: %v", kelvin, duv, err)
			}
			wantK, wantDuv := nearestOnLocus(p, kelvin*0.8, kelvin*1.25)
			if math.Abs(c.K-wantK) > toleranceK*max(1, wantK/10_000) || math.Abs(math.Abs(c.Duv)-wantDuv) > toleranceDuv || c.Duv*duv < 0 {
				t.Errorf("%g K, D_uv %g: %.3f K, %.7f; directly %.3f K, %.7f", kelvin, duv, c.K, c.Duv, wantK, wantDuv)
			}
		}
	}
}

func nearestOnLocus(p XY, low, high float64) (kelvin, distance float64) {
	u, v := p.uv60()
	away := func(k float64) float64 { n := nodeAt(k); return math.Hypot(u-n.u, v-n.v) }
	const golden = 0.6180339887498949
	a, b := high-golden*(high-low), low+golden*(high-low)
	fa, fb := away(a), away(b)
	for high-low > 1e-4 {
		if fa < fb {
			high, b, fb = b, a, fa
			a = high - golden*(high-low)
			fa = away(a)
		} else {
			low, a, fa = a, b, fb
			b = low + golden*(high-low)
			fb = away(b)
		}
	}
	return (low + high) / 2, away((low + high) / 2)
}

func TestCCTSaysWhereItHasNoMeaning(t *testing.T) {
	t.Parallel()
	for name, p := range map[string]XY{"green": {0.2, 0.7}, "blue": {0.15, 0.03}, "deep red": {0.72, 0.27}, "above every temperature": {0.22, 0.21}} {
		if c, err := CCTOf(p); !errors.Is(err, ErrNotMeaningful) {
			t.Errorf("%s: %+v, %v", name, c, err)
		}
	}
	if _, err := CCTOf(XY{0.3, 0}); err == nil || errors.Is(err, ErrNotMeaningful) {
		t.Errorf("y = 0: %v", err)
	}
	for _, c := range []CCT{{900, 0}, {5000, 0.06}, {2700, 0.05}, {math.NaN(), 0}, {4000, math.NaN()}} {
		if p, err := XYFromCCT(c); err == nil {
			t.Errorf("%+v has the chromaticity %v", c, p)
		}
	}
}
