package uniformity

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// wafer makes a full wafer of the given diameter and pitch with a layout, and a
// bowl of wavelengths over it in units of 0.01 nm.
func wafer(diameter, pitch float64, seed uint64) (*wafermap.Grid, *wafermap.Layout, []int32) {
	l := &wafermap.Layout{Name: "t", WaferDiameterMM: diameter, DiePitchXMM: pitch, DiePitchYMM: pitch, EdgeExclusionMM: 3,
		Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "down"}
	rng := rand.New(rand.NewPCG(seed, 9))
	g := &wafermap.Grid{}
	var k []int32
	reach := int(diameter / pitch / 2)
	for y := -reach; y <= reach; y++ {
		for x := -reach; x <= reach; x++ {
			if !l.OnWafer(x, y) {
				continue
			}
			g.X, g.Y = append(g.X, int16(x)), append(g.Y, int16(y))
			r := l.RadiusMM(x, y) / diameter * 2
			v := int32(45_400 + 300*r*r + 15*rng.NormFloat64())
			if rng.IntN(50) == 0 {
				v = wafermap.Missing32
			}
			k = append(k, v)
		}
	}
	return g, l, k
}

var wavelength, _ = quantity.Lookup("peak_wavelength_nm")

// TestSummariseAgreesWithFloats holds the counted path to the general one, which
// the NIST values hold to the world.
func TestSummariseAgreesWithFloats(t *testing.T) {
	t.Parallel()
	g, l, k := wafer(50, 0.5, 1)
	f := NewFrame(g, l)
	wide := slices.Clone(k)
	for i := range wide {
		if wide[i] != wafermap.Missing32 {
			wide[i] += int32(40_000 * (i % 3))
		}
	}
	veryWide := slices.Clone(wide)
	veryWide[len(veryWide)/2] = 2_000_000_000
	none := make([]int32, len(k))
	one := make([]int32, len(k))
	two := make([]int32, len(k))
	for i := range none {
		none[i], one[i], two[i] = wafermap.Missing32, wafermap.Missing32, wafermap.Missing32
	}
	middle := g.Find(0, 0)
	one[middle], two[middle], two[middle+1] = 45_500, 45_500, 45_503
	for name, k := range map[string][]int32{"int16": k, "int32": wide, "int32 too wide to count": veryWide, "none": none, "one": one, "two": two} {
		p := wafermap.PackScaled("peak_wavelength_nm", -2, slices.Clone(k))
		fromFloats := wafermap.Plane{Quantity: p.Quantity, Encoding: wafermap.Float64, F64: p.Floats(nil)}
		a, b := f.Summarise(&p, wavelength, 455), f.Summarise(&fromFloats, wavelength, 455)
		sameSummary(t, name, a, b)
		if a.N+a.Missing+a.Excluded != g.Len() || a.Excluded == 0 {
			t.Errorf("%s: %d + %d + %d dies of %d", name, a.N, a.Missing, a.Excluded, g.Len())
		}
		checkHistogram(t, name, a)
		checkHistogram(t, name+" as floats", b)
		ringN := 0
		for _, r := range a.Radial {
			ringN += r.N
		}
		if ringN != a.N || len(a.Radial) != radialRings {
			t.Errorf("%s: %d of %d values in %d rings", name, ringN, a.N, len(a.Radial))
		}
	}
}

// sameSummary compares everything but the histogram: order statistics exactly,
// moments to momentTolerance.
func sameSummary(t *testing.T, name string, a, b Summary) {
	t.Helper()
	const momentTolerance = 1e-10 // relative; sums of some 10⁴ floats on one side
	exact := [][2]float64{{a.Min, b.Min}, {a.Max, b.Max}, {a.Q01, b.Q01}, {a.Q05, b.Q05}, {a.Q25, b.Q25}, {a.Median, b.Median},
		{a.Q75, b.Q75}, {a.Q95, b.Q95}, {a.Q99, b.Q99}, {a.Within1, b.Within1}, {a.Within2, b.Within2}, {a.Within5, b.Within5}}
	for i, v := range exact {
		if v[0] != v[1] && !(math.IsNaN(v[0]) && math.IsNaN(v[1])) {
			t.Errorf("%s: order statistic %d: %v, by floats %v", name, i, v[0], v[1])
		}
	}
	near := [][2]float64{{a.Mean, b.Mean}, {a.SD, b.SD}, {a.RobustSD, b.RobustSD}}
	for i := range a.Radial {
		near = append(near, [2]float64{a.Radial[i].Mean, b.Radial[i].Mean}, [2]float64{a.Radial[i].SD, b.Radial[i].SD})
	}
	for i, v := range near {
		if math.Abs(v[0]-v[1]) > momentTolerance*max(1, math.Abs(v[0])) || math.IsNaN(v[0]) != math.IsNaN(v[1]) {
			t.Errorf("%s: moment %d: %v, by floats %v", name, i, v[0], v[1])
		}
	}
	if a.N != b.N || a.Missing != b.Missing || a.Excluded != b.Excluded || a.Implausible != b.Implausible {
		t.Errorf("%s: counts %v, by floats %v", name, a, b)
	}
}

func checkHistogram(t *testing.T, name string, s Summary) {
	t.Helper()
	total := s.Histogram.Below + s.Histogram.Above
	for _, n := range s.Histogram.Counts {
		total += n
	}
	if total != s.N {
		t.Errorf("%s: histogram holds %d of %d values", name, total, s.N)
	}
	if n := len(s.Histogram.Counts); n > maxCells+2 || (s.N > 2 && n < 2) {
		t.Errorf("%s: %d cells", name, n)
	}
}

func TestFrameWithoutLayoutCountsAll(t *testing.T) {
	t.Parallel()
	g, l, k := wafer(50, 1, 2)
	p := wafermap.PackScaled("peak_wavelength_nm", -2, k)
	if s := NewFrame(g, nil).Summarise(&p, wavelength, math.NaN()); s.Excluded != 0 || len(s.Radial) != 0 || s.Radial == nil || !math.IsNaN(s.Within1) {
		t.Errorf("no layout: %+v", s)
	}
	l.Assumed = true
	if s := NewFrame(g, l).Summarise(&p, wavelength, 455); s.Excluded != 0 || len(s.Radial) != radialRings {
		t.Errorf("assumed layout: %d excluded, %d rings", s.Excluded, len(s.Radial))
	}
	short := wafermap.PackScaled("peak_wavelength_nm", -2, k[:3])
	if s := NewFrame(g, l).Summarise(&short, wavelength, 455); s.N != 0 {
		t.Errorf("a plane of another grid was summarised: %+v", s)
	}
}

// TestRingsAndInclude checks the incremental row walks against their definitions.
func TestRingsAndInclude(t *testing.T) {
	t.Parallel()
	g, l, _ := wafer(60, 0.7, 3)
	l.CentreX, l.CentreY, l.XAxis = 0.37, -1.2, "left"
	f := NewFrame(g, l)
	for i := range g.X {
		x, y := int(g.X[i]), int(g.Y[i])
		if f.include[i] != l.Inside(x, y) {
			t.Fatalf("die (%d, %d): include %v", x, y, f.include[i])
		}
		r := l.RadiusMM(x, y)
		want := min(noRing, int(r/f.ringWidthMM))
		const rounding = 1e-9 // of a ring's width, for dies on a ring's border
		if int(f.rings[i]) != want && math.Abs(r/f.ringWidthMM-math.Round(r/f.ringWidthMM)) > rounding {
			t.Fatalf("die (%d, %d) at %g mm: ring %d, want %d", x, y, r, f.rings[i], want)
		}
	}
}

func TestImplausibleAndWithinAreClosed(t *testing.T) {
	t.Parallel()
	q := quantity.Quantity{Name: "v", Low: 1, High: 3}
	g := &wafermap.Grid{X: []int16{0, 1, 2, 3, 4}, Y: make([]int16, 5)}
	p := wafermap.PackScaled("v", -2, []int32{100, 300, 99, 301, 210})
	if s := NewFrame(g, nil).Summarise(&p, q, 2.0); s.Implausible != 2 || s.Within1 != 3.0/5 {
		t.Errorf("%d implausible, %g within ±1", s.Implausible, s.Within1)
	}
}

func TestSmallMapIsOriented(t *testing.T) {
	t.Parallel()
	for _, pitch := range []float64{0.4, 5} { // many dies per cell, many cells per die
		g, l, k := wafer(50, pitch, 4)
		for i := range k {
			k[i] = int32(g.X[i]) + 1000 // grows to the right
		}
		l.YAxis = "up"
		p := wafermap.PackScaled("peak_wavelength_nm", -2, k)
		m := NewFrame(g, l).SmallMap(&p)
		middle := m.Cells[m.Size*m.Size/2 : m.Size*m.Size/2+m.Size]
		if m.Size != 48 || len(m.Cells) != 48*48 || m.Cells[0] != 0 || m.Cells[47] != 0 {
			t.Fatalf("pitch %g: corners are not empty", pitch)
		}
		if middle[6] >= middle[24] || middle[24] >= middle[41] || slices.Contains(middle[6:42], 0) {
			t.Errorf("pitch %g: x does not grow to the right: %v", pitch, middle)
		}
		for i := range k {
			k[i] = int32(g.Y[i]) + 1000 // grows upward
		}
		p = wafermap.PackScaled("peak_wavelength_nm", -2, k)
		m = NewFrame(g, l).SmallMap(&p)
		if top, bottom := m.Cells[8*48+24], m.Cells[40*48+24]; top <= bottom {
			t.Errorf("pitch %g: row 0 is not at the top: %d above %d", pitch, top, bottom)
		}
		s := NewFrame(g, l).Summarise(&p, wavelength, 455)
		if painted := NewFrame(g, l).Paint(&p, s.Q01, s.Q99); !slices.Equal(painted.Cells, m.Cells) || m.Low != s.Q01 || m.High != s.Q99 {
			t.Errorf("pitch %g: Paint over Q01..Q99 differs from SmallMap", pitch)
		}
	}
}

func TestSmallMapOfFloatsAndNothing(t *testing.T) {
	t.Parallel()
	g, l, k := wafer(50, 0.5, 5)
	f := NewFrame(g, l)
	p := wafermap.PackScaled("q", -2, slices.Clone(k))
	float := wafermap.Plane{Encoding: wafermap.Float64, F64: p.Floats(nil)}
	a, b := f.SmallMap(&p), f.SmallMap(&float)
	if a.Low != b.Low || a.High != b.High {
		t.Errorf("range %g..%g, by floats %g..%g", a.Low, a.High, b.Low, b.High)
	}
	for i := range a.Cells {
		if d := int(a.Cells[i]) - int(b.Cells[i]); d < -1 || d > 1 { // a mean's last bits may move a code by one
			t.Fatalf("cell %d: %d, by floats %d", i, a.Cells[i], b.Cells[i])
		}
	}
	for i := range k {
		k[i] = wafermap.Missing32
	}
	p = wafermap.PackScaled("q", -2, k)
	if m := f.SmallMap(&p); slices.Max(m.Cells) != 0 || !math.IsNaN(m.Low) {
		t.Error("a plane without values was painted")
	}
}

func BenchmarkFrame(b *testing.B) {
	for _, c := range []struct {
		name            string
		diameter, pitch float64
	}{{"15k dies", 50, 0.36}, {"50k dies", 100, 0.39}, {"1M dies", 200, 0.175}} {
		g, l, k := wafer(c.diameter, c.pitch, 6)
		f := NewFrame(g, l)
		p := wafermap.PackScaled("peak_wavelength_nm", -2, slices.Clone(k))
		float := wafermap.PackFloat32("peak_wavelength_nm", make([]float32, len(k)))
		for i := range k {
			float.F32[i] = float32(p.Value(i))
		}
		rate := func(b *testing.B) {
			b.ReportMetric(float64(g.Len())*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mvalues/s")
		}
		b.Run(c.name+"/new", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				NewFrame(g, l)
			}
			rate(b)
		})
		b.Run(c.name+"/summary and map int16", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				s := f.Summarise(&p, wavelength, 455)
				f.Paint(&p, s.Q01, s.Q99)
			}
			rate(b)
		})
		b.Run(c.name+"/summary float32", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				f.Summarise(&float, wavelength, 455)
			}
			rate(b)
		})
	}
}
