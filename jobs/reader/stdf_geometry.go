package reader

import (
	"fmt"

	"epitally/analytics/wafermap"
)

// mmPer gives the millimetres of WF_UNITS: inch, centimetre, millimetre, mil.
var mmPer = map[uint8]float64{1: 25.4, 2: 10, 3: 1, 4: 0.0254}

var flatAngles = map[uint8]float64{'R': 0, 'U': 90, 'L': 180, 'D': 270}

// geometry reads the WCR, of which a file has one. Note that height stands
// before width, and that the unit is the file's.
func (r *stdfReader) geometry(f *fields) {
	size, height, width := f.r4(), f.r4(), f.r4()
	units, flat := f.u1(0), f.u1(' ')
	cx, cy := f.i2(noCoordinate), f.i2(noCoordinate)
	posX, posY := f.u1(' '), f.u1(' ')
	l := &wafermap.Layout{Assumed: true}
	const longest = 500 // mm, of a wafer
	for _, v := range []struct {
		what  string
		value float32
		to    *float64
	}{{"wafer diameter", size, &l.WaferDiameterMM}, {"die width", width, &l.DiePitchXMM}, {"die height", height, &l.DiePitchYMM}} {
		if !(v.value > 0) {
			continue
		}
		mm := roundedMM(v.value, mmPer[units])
		if mm > 0.01 && mm <= longest {
			*v.to = mm
		} else {
			r.notice("the %s of the WCR record (%g in unit %d) is not one of a wafer: passed over", v.what, v.value, units)
		}
	}
	if angle, ok := flatAngles[flat]; ok {
		l.Mark, l.MarkAngleDeg = "flat", angle
	}
	l.XAxis = map[uint8]string{'L': "left", 'R': "right"}[posX]
	l.YAxis = map[uint8]string{'U': "up", 'D': "down"}[posY]
	if cx != noCoordinate && cy != noCoordinate {
		l.CentreX, l.CentreY = float64(cx), float64(cy)
	}
	if *l == (wafermap.Layout{Assumed: true}) {
		return
	}
	if r.base.layout != nil { // what the profile states stands
		return
	}
	if r.res.Wafers > 0 {
		r.notice("the wafer geometry (WCR record at byte %d) stands after the first wafers, which do not have it", r.rec.offset)
	}
	r.base.layout = l
}

// roundedMM converts a binary32 length to mm by its shortest decimal, so that
// 0.4392 cm is 4.392 mm and not 4.39200013876.
func roundedMM(v float32, mm float64) float64 {
	var shortest float64
	if _, err := fmt.Sscan(fmt.Sprint(v), &shortest); err != nil {
		return 0
	}
	const decimals = 1e6 // a nanometre
	if x := shortest * mm; x < 1e9 {
		return float64(int64(x*decimals+0.5)) / decimals
	}
	return shortest * mm
}
