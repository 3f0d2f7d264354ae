package reader

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// stdfWafer gathers the parts of one wafer, one row each, in file order.
type stdfWafer struct {
	id       string
	opened   int64 // offset of the WIR
	start    uint32
	finished uint32
	notices  []string
	x, y     []int16
	hard     []int32
	soft     []int32
	time     []int32
	pass     []int32
	results  [][]float32  // by test; rows beyond the end have no value, nil = none at all
	values   int          // held in results
	unusable map[int]bool // tests that ran at least once without a usable result
	unplaced int          // parts without coordinates
}

func (r *stdfReader) openWafer(f *fields) error {
	if err := r.flush(); err != nil {
		return err
	}
	head := f.u1(1)
	f.u1(255) // SITE_GRP
	w := &stdfWafer{opened: r.rec.offset, start: f.u4(0), unusable: map[int]bool{}}
	w.id = f.text()
	if before := r.wafers[head]; before != nil {
		before.notices = append(before.notices, "the tester did not close this wafer (no WRR record)")
		if err := r.finish(before); err != nil {
			return err
		}
		if err := r.flush(); err != nil {
			return err
		}
	}
	r.wafers[head] = w
	return nil
}

// waferOf is the wafer open on a head; the only open one when the head is not
// told apart.
func (r *stdfReader) waferOf(head uint8) (*stdfWafer, uint8) {
	if w := r.wafers[head]; w != nil {
		return w, head
	}
	if len(r.wafers) == 1 {
		for h, w := range r.wafers {
			return w, h
		}
	}
	return nil, 0
}

// closeWafer reads the WRR, whose WAFER_ID supersedes the WIR's.
func (r *stdfReader) closeWafer(f *fields) error {
	head := f.u1(1)
	f.u1(255)
	finished, parts := f.u4(0), f.u4(math.MaxUint32)
	f.take(4 * 4) // RTST_CNT, ABRT_CNT, GOOD_CNT, FUNC_CNT
	id := f.text()
	w, head := r.waferOf(head)
	if w == nil {
		r.odd.strayWRR++
		return nil
	}
	w.finished = finished
	if id != "" {
		w.id = id
	}
	if held := len(w.x) + w.unplaced; parts != math.MaxUint32 && int(parts) != held {
		w.notices = append(w.notices, fmt.Sprintf("the tester counts %d parts, the file holds %d", parts, held))
	}
	delete(r.wafers, head)
	return r.finish(w)
}

// finish lays a closed wafer aside until the next begins.
func (r *stdfReader) finish(w *stdfWafer) error {
	if len(w.x) == 0 && w.unplaced > 0 {
		return w.fault("have the prober hand the die coordinates to the tester", "none of the %d parts of wafer %q has die coordinates", w.unplaced, w.id)
	}
	if len(w.x) == 0 {
		if r.odd.empty++; r.odd.empty == 1 {
			r.odd.emptyName = w.id
		}
		return nil
	}
	if w.unplaced > 0 {
		w.notices = append(w.notices, fmt.Sprintf("%d parts have no die coordinates: they are left out", w.unplaced))
	}
	if err := r.flush(); err != nil {
		return err
	}
	r.waiting = w
	return nil
}

// flush hands over the wafer that was laid aside.
func (r *stdfReader) flush() error {
	w := r.waiting
	if w == nil {
		return nil
	}
	r.waiting = nil
	m, err := r.measurement(w)
	if err != nil {
		return err
	}
	return r.give(m)
}

func (w *stdfWafer) fault(remedy, problem string, args ...any) *analytics.Fault {
	return &analytics.Fault{Offset: w.opened, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
}

func (r *stdfReader) measurement(w *stdfWafer) (*Measurement, error) {
	a, err := r.aboutWafer(w)
	if err != nil {
		return nil, err
	}
	if r.p != nil {
		if err := r.p.place.apply(w.x, w.y, nil); err != nil {
			f := err.(*analytics.Fault)
			f.Offset = w.opened
			return nil, f
		}
	}
	order := wafermap.Canonical(w.x, w.y)
	if order.Dies() == 1 && len(w.x) > 1 {
		return nil, w.fault("have the prober write the die coordinates", "all %d parts of wafer %s stand at (%d, %d)", len(w.x), a.wafer, w.x[0], w.y[0])
	}
	if order.Starts != nil && a.duplicates == refuseDuplicates {
		return nil, w.fault("state duplicates: last (or first) in the reading profile", "%d dies of wafer %s are measured more than once", order.Repeated(), a.wafer)
	}
	rows := order.Last()
	if a.duplicates == firstWins {
		rows = order.First()
	}
	m := a.measurement()
	m.Remeasured, m.Notices = order.Repeated(), w.notices
	if err := r.planes(m, w, rows); err != nil {
		return nil, err
	}
	m.Grid = wafermap.Grid{X: wafermap.Gather(w.x, rows), Y: wafermap.Gather(w.y, rows)}
	return m, nil
}

// aboutWafer is what the profile, the MIR, the WCR and the wafer's own records
// state of a measurement.
func (r *stdfReader) aboutWafer(w *stdfWafer) (a about, err error) {
	a = r.base.inherit()
	a.layout = mergedLayout(a.layout, r.wcr)
	if a.wafer == "" {
		a.wafer = w.id
	}
	if err := checkName("wafer", a.wafer); err != nil {
		f := err.(*analytics.Fault)
		f.Offset, f.Remedy = w.opened, f.Remedy+", or state the wafer by file_name in a reading profile"
		return a, f
	}
	if a.measuredAt.IsZero() {
		if a.measuredAt, err = r.moment(w); err != nil {
			return a, err
		}
	}
	key := fmt.Sprintf("%s\x00%d", a.wafer, a.measuredAt.Unix())
	if first, twice := r.begun[key]; twice {
		return a, w.fault("give each wafer a name of its own", "wafer %s stands a second time with the same time, first at byte %d", a.wafer, first)
	}
	r.begun[key] = w.opened
	return a, nil
}

// planes packs the tests that ran on the wafer, then the bins, the verdict and
// the test time. It uses the wafer's results up.
func (r *stdfReader) planes(m *Measurement, w *stdfWafer, rows []int32) error {
	tests := 0
	for _, v := range w.results {
		if v != nil {
			tests++
		}
	}
	if tests*len(w.x) > maxValues { // columns that end early are short until now
		f := tooManyResults()
		f.Offset = w.opened
		return f
	}
	var without []string
	for i := range r.tests.list {
		t := &r.tests.list[i]
		var v []float32
		if i < len(w.results) && w.results[i] != nil {
			v = wafermap.Gather(padded(w.results[i], len(w.x)), rows)
			w.results[i] = nil
		}
		if !slices.ContainsFunc(v, func(v float32) bool { return v == v }) {
			if v != nil || w.unusable[i] {
				without = append(without, t.quantity.Name)
			}
			continue
		}
		if t.convert.Power != 0 || t.convert.Multiple != 1 {
			for k := range v {
				v[k] = float32(convertFloat(float64(v[k]), t.convert))
			}
		}
		m.add(t.quantity, wafermap.PackFloat32(t.quantity.Name, v))
	}
	if n := len(without); n > 0 {
		const most = 5
		m.Notices = append(m.Notices, fmt.Sprintf("%d tests have no usable result on this wafer and are left out: %s", n, listed(without, most)))
	}
	verdict, err := quantity.Declare(testerPass, "Passed by the tester", "", 1)
	if err != nil {
		return err
	}
	m.addCodes(verdict, w.pass, rows)
	for _, c := range []struct {
		name string
		k    []int32
	}{{"hard_bin", w.hard}, {"soft_bin", w.soft}, {"test_time_ms", w.time}} {
		q, _ := quantity.Lookup(c.name)
		m.addCodes(q, c.k, rows)
	}
	return nil
}

// testerPass is 1 for a part that the tester passed, 0 for one that it failed.
const testerPass = "tester_pass"

func (m *Measurement) add(q quantity.Quantity, p wafermap.Plane) {
	m.Quantities, m.Planes = append(m.Quantities, q), append(m.Planes, p)
}

// addCodes adds whole numbers of the PRR, unless none is stated or the profile
// fills that quantity from a test.
func (m *Measurement) addCodes(q quantity.Quantity, k, rows []int32) {
	named := func(have quantity.Quantity) bool { return have.Name == q.Name }
	if slices.ContainsFunc(m.Quantities, named) || !slices.ContainsFunc(k, func(k int32) bool { return k != wafermap.Missing32 }) {
		return
	}
	m.add(q, wafermap.PackScaled(q.Name, 0, wafermap.Gather(k, rows)))
}

// listed is the first names, and how many more there are.
func listed(names []string, most int) string {
	if len(names) <= most {
		return strings.Join(names, ", ")
	}
	return fmt.Sprintf("%s and %d more", strings.Join(names[:most], ", "), len(names)-most)
}

// moment is when the wafer's test began: seconds since 1970 on the tester's own
// clock, whose zone the file does not hold. What is not stated gives way to the
// lot's begin, then to the wafer's and the lot's end.
func (r *stdfReader) moment(w *stdfWafer) (time.Time, error) {
	for _, seconds := range []uint32{w.start, r.start, w.finished, r.stop} {
		if seconds == 0 {
			continue
		}
		if r.zone == nil {
			r.zone = r.job.moment(r.p)
		}
		u := time.Unix(int64(seconds), 0).UTC()
		t := time.Date(u.Year(), u.Month(), u.Day(), u.Hour(), u.Minute(), u.Second(), 0, r.zone)
		if err := checkYear(t, u.Format(time.DateTime)); err != nil {
			f := err.(*analytics.Fault)
			f.Offset = w.opened
			return t, f
		}
		return t, nil
	}
	return time.Time{}, w.fault("state measured_at by file_name in a reading profile", "nothing says when wafer %q was measured", w.id)
}
