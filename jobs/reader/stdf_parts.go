package reader

import (
	"math"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// The values that mean "missing" in a PRR.
const (
	noCoordinate = -32768
	noSoftBin    = 65535
)

func (r *stdfReader) openPart(f *fields) error {
	at := site{f.u1(1), f.u1(1)}
	if p := r.parts[at]; p != nil {
		if len(p.tests) > 0 {
			r.notice("a part on head %d, site %d was not closed: its results are left out", at.head, at.number)
		}
		p.tests, p.values = p.tests[:0], p.values[:0]
		return nil
	}
	r.parts[at] = &stdfPart{}
	return nil
}

// parametric reads a PTR: one result of one part. RESULT is in base units; its
// RES_SCAL is for showing only.
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
	if part == nil {
		if testFlag&0x10 == 0 { // executed, not only the defaults of later records
			r.notice("results stand outside any part: they are left out")
		}
		return nil
	}
	if test < 0 {
		return nil
	}
	if testFlag&0x3f != 0 || parmFlag&0x07 != 0 || math.IsInf(float64(result), 0) {
		result = float32(math.NaN())
	}
	for i, t := range part.tests { // a test that ran again: its last usable result
		if t == test {
			if result == result {
				part.values[i] = result
			}
			return nil
		}
	}
	part.tests, part.values = append(part.tests, test), append(part.values, result)
	return nil
}

// closePart reads a PRR and adds the part to its wafer.
func (r *stdfReader) closePart(f *fields) error {
	at := site{f.u1(1), f.u1(1)}
	f.u1(0) // PART_FLG
	f.u2(0) // NUM_TEST
	hard, soft := f.u2(0), f.u2(noSoftBin)
	x, y := f.i2(noCoordinate), f.i2(noCoordinate)
	ms := f.u4(0)
	w, _ := r.waferOf(at.head)
	switch {
	case w == nil && x == noCoordinate:
		return r.rec.fault("only wafer test, with its wafers and die coordinates, makes a map", "the part has no die coordinates and belongs to no wafer: this is a test of packaged parts")
	case w == nil:
		return r.rec.fault("have the tester write WIR and WRR records about the parts of each wafer", "the part at (%d, %d) belongs to no wafer", x, y)
	case x == noCoordinate || y == noCoordinate:
		return r.rec.fault("have the prober hand the die coordinates to the tester", "the part has no die coordinates")
	}
	part := r.parts[at]
	delete(r.parts, at)
	if part == nil {
		r.notice("a PRR record at byte %d closes a part that was not opened", r.rec.offset)
		part = &stdfPart{}
	}
	if err := w.add(part); err != nil {
		err.Offset = r.rec.offset
		return err
	}
	w.x, w.y = append(w.x, x), append(w.y, y)
	w.hard = append(w.hard, int32(hard))
	softBin, time := int32(soft), int32(wafermap.Missing32)
	if soft == noSoftBin {
		softBin = wafermap.Missing32
	}
	if ms != 0 && ms <= math.MaxInt32 {
		time = int32(ms)
	}
	w.soft, w.time = append(w.soft, softBin), append(w.time, time)
	return nil
}

// add stores the results of a part as the next row.
func (w *stdfWafer) add(p *stdfPart) *analytics.Fault {
	row := len(w.x)
	if row >= wafermap.MaxDies {
		return &analytics.Fault{Kind: analytics.ErrTooLarge, Problem: "the wafer has too many parts", Remedy: "check that the file closes its wafers"}
	}
	for i, t := range p.tests {
		v := w.results[t]
		w.values += row + 1 - len(v)
		v = padded(v, row)
		w.results[t] = append(v, p.values[i])
	}
	if w.values > maxValues {
		return &analytics.Fault{Kind: analytics.ErrTooLarge, Problem: "the wafer has too many results to hold", Remedy: "name the tests you need in a reading profile"}
	}
	return nil
}
