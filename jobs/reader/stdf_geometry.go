package reader

import (
	"math"
	"strconv"

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
	if r.wcr != nil {
		r.notice("the file states the wafer's geometry several times (WCR): the first counts")
		return
	}
	l := &wafermap.Layout{Assumed: true}
	const longest = 500 // mm, of a wafer
	l.WaferDiameterMM = r.length("wafer diameter", size, units, longest)
	if l.WaferDiameterMM > 0 {
		l.DiePitchXMM = r.length("die width", width, units, l.WaferDiameterMM)
		l.DiePitchYMM = r.length("die height", height, units, l.WaferDiameterMM)
	} else {
		l.DiePitchXMM = r.length("die width", width, units, longest)
		l.DiePitchYMM = r.length("die height", height, units, longest)
	}
	if angle, ok := flatAngles[flat]; ok {
		l.Mark, l.MarkAngleDeg = "flat", angle
	}
	l.XAxis = map[uint8]string{'L': "left", 'R': "right"}[posX]
	l.YAxis = map[uint8]string{'U': "up", 'D': "down"}[posY]
	if cx != noCoordinate && cy != noCoordinate {
		l.CentreX, l.CentreY = float64(cx), float64(cy)
	}
	if r.p != nil {
		r.p.place.applyLayout(l)
	}
	if *l == (wafermap.Layout{Assumed: true}) {
		return
	}
	if r.res.Wafers > 0 {
		r.notice("the wafer geometry (WCR record at byte %d) stands after the first wafers, which do not have it", r.rec.offset)
	}
	r.wcr = l
}

// length converts a length of the WCR; 0 = not stated, or nonsense, of which
// notice is given.
func (r *stdfReader) length(what string, v float32, units uint8, longest float64) float64 {
	if v == 0 || math.IsNaN(float64(v)) {
		return 0
	}
	const shortest = 0.01 // mm
	if mm := roundedMM(v, mmPer[units]); mm > shortest && mm <= longest {
		return mm
	}
	r.notice("the %s of the WCR record (%g in unit %d) is not one of a wafer: passed over", what, v, units)
	return 0
}

// roundedMM converts a binary32 length to mm by its shortest decimal, so that
// 0.4392 cm is 4.392 mm and not 4.39200013876, to a nanometre.
func roundedMM(v float32, mm float64) float64 {
	shortest, err := strconv.ParseFloat(strconv.FormatFloat(float64(v), 'g', -1, 32), 64)
	if err != nil {
		return 0
	}
	const perMM = 1e6
	return math.Round(shortest*mm*perMM) / perMM
}

// applyLayout follows apply: axes turn and the centre moves with the dies. Dies
// that are swapped run along the other axis, of which the file's words for
// left, right, up and down say nothing.
func (p *placement) applyLayout(l *wafermap.Layout) {
	turned := map[string]string{"left": "right", "right": "left", "up": "down", "down": "up"}
	if p.swap {
		l.XAxis, l.YAxis = "", ""
		l.CentreX, l.CentreY = l.CentreY, l.CentreX
	}
	stated := l.CentreX != 0 || l.CentreY != 0
	if p.negateX {
		l.XAxis, l.CentreX = turned[l.XAxis], 0-l.CentreX
	}
	if p.negateY {
		l.YAxis, l.CentreY = turned[l.YAxis], 0-l.CentreY
	}
	if stated {
		l.CentreX, l.CentreY = l.CentreX+float64(p.offsetX), l.CentreY+float64(p.offsetY)
	}
}

// mergedLayout is what the profile states, completed from the WCR. Both may be
// nil.
func mergedLayout(profile, wcr *wafermap.Layout) *wafermap.Layout {
	if profile == nil || wcr == nil {
		if profile == nil && wcr != nil {
			l := *wcr // belongs to the measurement
			return &l
		}
		return profile
	}
	l := *profile
	take := func(to *float64, from float64) {
		if *to == 0 {
			*to = from
		}
	}
	take(&l.WaferDiameterMM, wcr.WaferDiameterMM)
	take(&l.DiePitchXMM, wcr.DiePitchXMM)
	take(&l.DiePitchYMM, wcr.DiePitchYMM)
	if l.Mark == "" {
		l.Mark, l.MarkAngleDeg = wcr.Mark, wcr.MarkAngleDeg
	}
	if l.XAxis == "" {
		l.XAxis = wcr.XAxis
	}
	if l.YAxis == "" {
		l.YAxis = wcr.YAxis
	}
	if l.CentreX == 0 && l.CentreY == 0 {
		l.CentreX, l.CentreY = wcr.CentreX, wcr.CentreY
	}
	return &l
}
