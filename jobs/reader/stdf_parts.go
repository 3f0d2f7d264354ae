package reader

import (
	"math"
	"slices"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// The values that mean "missing" in a PRR.
const (
	noCoordinate = -32768
	noSoftBin    = 65535
	maxHardBin   = 32767
)

// maxSites bounds the sites of a file: testers of today work hundreds.
const maxSites = 2048

// Bits of PART_FLG.
const (
	partFailed    = 1 << 3
	partNoVerdict = 1 << 4
)

// Bits of TEST_FLG and PARM_FLG that make RESULT unusable: alarm, not valid,
// unreliable, timeout, not executed, aborted; scale error, drift, oscillation.
const (
	testUnusable    = 0x3f
	testNotExecuted = 1 << 4
	parmUnusable    = 0x07
)

// stdfPart is a part under test: what its tests gave so far. One is kept per
// site and used again for the site's next part.
type stdfPart struct {
	open   bool
	ran    []int     // tests with a usable result
	values []float32 // by test; NaN = no usable result
}

func (p *stdfPart) set(test int, result float32) {
	p.values = padded(p.values, test+1)
	if math.IsNaN(float64(p.values[test])) {
		p.ran = append(p.ran, test)
	}
	p.values[test] = result
}

// begin makes the part a new one.
func (p *stdfPart) begin(open bool) {
	for _, t := range p.ran {
		p.values[t] = float32(math.NaN())
	}
	p.ran, p.open = p.ran[:0], open
}

func (r *stdfReader) openPart(f *fields) error {
	at := site{f.u1(1), f.u1(1)}
	p := r.parts[at]
	if p == nil {
		if len(r.parts) >= maxSites {
			f := r.rec.fault("check that the file is from a tester", "over %d test sites", maxSites)
			f.Kind = analytics.ErrTooLarge
			return f
		}
		p = &stdfPart{}
		r.parts[at] = p
	}
	if p.open {
		r.odd.unclosed++
	}
	p.begin(true)
	return nil
}

// parametric reads a PTR: one result of one part. RESULT is in base units; its
// RES_SCAL is for showing only. Of a test that ran several times on a part, the
// last usable result counts.
func (r *stdfReader) parametric(f *fields) error {
	number := f.u4(0)
	at := site{f.u1(1), f.u1(1)}
	testFlag, parmFlag := f.u1(0xff), f.u1(0xff)
	result := f.r4()
	text := f.raw()
	f.raw() // ALARM_ID
	test, err := r.tests.find(number, text, f)
	if err != nil {
		return r.placed(err)
	}
	part := r.parts[at]
	if part == nil || !part.open {
		if testFlag&testNotExecuted == 0 { // not only the defaults of later records
			r.odd.stray++
		}
		return nil
	}
	if test < 0 {
		return nil
	}
	if v := float64(result); testFlag&testUnusable != 0 || parmFlag&parmUnusable != 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		if w, _ := r.waferOf(at.head); w != nil {
			w.unusable[test] = true
		}
		return nil
	}
	part.set(test, result)
	return nil
}

// closePart reads a PRR and adds the part to its wafer.
func (r *stdfReader) closePart(f *fields) error {
	at := site{f.u1(1), f.u1(1)}
	flag := f.u1(partNoVerdict)
	f.u2(0) // NUM_TEST
	hard, soft := f.u2(noSoftBin), f.u2(noSoftBin)
	x, y := f.i2(noCoordinate), f.i2(noCoordinate)
	ms := f.u4(0)
	w, _ := r.waferOf(at.head)
	switch {
	case w == nil && x == noCoordinate:
		return r.rec.fault("only wafer test, with its wafers and die coordinates, makes a map", "the part has no die coordinates and belongs to no wafer: this is a test of packaged parts")
	case w == nil:
		return r.rec.fault("have the tester write WIR and WRR records about the parts of each wafer", "the part at (%d, %d) belongs to no wafer", x, y)
	}
	part := r.parts[at]
	if part == nil {
		part = &stdfPart{}
	}
	if !part.open {
		r.odd.unopened++
	}
	defer part.begin(false)
	if x == noCoordinate || y == noCoordinate {
		w.unplaced++
		return nil
	}
	if err := w.add(part); err != nil {
		err.Offset = r.rec.offset
		return err
	}
	w.x, w.y = append(w.x, x), append(w.y, y)
	w.hard = append(w.hard, stated(uint32(hard), hard <= maxHardBin))
	w.soft = append(w.soft, stated(uint32(soft), soft != noSoftBin))
	w.time = append(w.time, stated(ms, ms != 0 && ms <= math.MaxInt32))
	verdict := int32(1)
	if flag&partFailed != 0 {
		verdict = 0
	}
	w.pass = append(w.pass, stated(uint32(verdict), flag&partNoVerdict == 0))
	return nil
}

// stated is v, or "no value" when the record does not state it.
func stated(v uint32, is bool) int32 {
	if !is {
		return wafermap.Missing32
	}
	return int32(v)
}

// add stores the results of a part as the next row.
func (w *stdfWafer) add(p *stdfPart) *analytics.Fault {
	row := len(w.x)
	if row >= wafermap.MaxDies {
		return &analytics.Fault{Kind: analytics.ErrTooLarge, Problem: "the wafer has too many parts", Remedy: "check that the file closes its wafers"}
	}
	for _, t := range p.ran {
		if t >= len(w.results) {
			w.results = append(w.results, make([][]float32, t+1-len(w.results))...)
		}
		v := w.results[t]
		w.values += row + 1 - len(v)
		w.results[t] = append(padded(v, row), p.values[t])
	}
	if w.values > maxValues {
		return tooManyResults()
	}
	return nil
}

func tooManyResults() *analytics.Fault {
	return &analytics.Fault{Kind: analytics.ErrTooLarge, Problem: "the wafer has too many results to hold", Remedy: "name the tests you need in a reading profile"}
}

// padded extends results to n rows.
func padded(v []float32, n int) []float32 {
	if len(v) >= n {
		return v
	}
	v = slices.Grow(v, n-len(v))
	for len(v) < n {
		v = append(v, float32(math.NaN()))
	}
	return v
}
