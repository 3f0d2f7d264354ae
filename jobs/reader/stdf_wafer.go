package reader

import (
	"fmt"
	"math"
	"slices"
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
	results  map[int][]float32 // by test; rows beyond the end have no value
	values   int
}

// stdfPart is a part under test: what its tests gave so far.
type stdfPart struct {
	tests  []int
	values []float32 // NaN = executed without a usable result
}

func (r *stdfReader) openWafer(f *fields) error {
	if err := r.flush(); err != nil {
		return err
	}
	head := f.u1(1)
	f.u1(255) // SITE_GRP
	w := &stdfWafer{opened: r.rec.offset, start: f.u4(0), results: map[int][]float32{}}
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
		r.notice("a WRR record at byte %d closes a wafer that was not opened", r.rec.offset)
		return nil
	}
	w.finished = finished
	if id != "" {
		w.id = id
	}
	if parts != math.MaxUint32 && int(parts) != len(w.x) {
		w.notices = append(w.notices, fmt.Sprintf("the tester counts %d parts, the file holds %d", parts, len(w.x)))
	}
	delete(r.wafers, head)
	return r.finish(w)
}

// finish lays a closed wafer aside until the next begins.
func (r *stdfReader) finish(w *stdfWafer) error {
	if len(w.x) == 0 {
		r.notice("wafer %q has no dies", w.id)
		return nil
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
	a := r.base.inherit()
	if a.wafer == "" {
		a.wafer = w.id
	}
	if err := checkName("wafer", a.wafer); err != nil {
		f := err.(*analytics.Fault)
		f.Offset, f.Remedy = w.opened, f.Remedy+", or state the wafer by file_name in a reading profile"
		return nil, f
	}
	if first, twice := r.ids[a.wafer]; twice {
		return nil, w.fault("give each wafer a name of its own", "wafer %s stands a second time, first at byte %d", a.wafer, first)
	}
	r.ids[a.wafer] = w.opened
	if a.measuredAt.IsZero() {
		var err error
		if a.measuredAt, err = r.moment(w); err != nil {
			return nil, err
		}
	}
	if r.p != nil {
		if err := r.p.place.apply(w.x, w.y, nil); err != nil {
			return nil, r.placed(err)
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
	r.planes(m, w, rows)
	m.Grid = wafermap.Grid{X: wafermap.Gather(w.x, rows), Y: wafermap.Gather(w.y, rows)}
	return m, nil
}

// planes packs the tests that ran on the wafer, then the bins and the test time.
func (r *stdfReader) planes(m *Measurement, w *stdfWafer, rows []int32) {
	add := func(q quantity.Quantity, p wafermap.Plane) {
		m.Quantities, m.Planes = append(m.Quantities, q), append(m.Planes, p)
	}
	for i := range r.tests.list {
		t := &r.tests.list[i]
		v, ran := w.results[i]
		if !ran {
			continue
		}
		v = padded(v, len(w.x))
		if t.convert.Power != 0 || t.convert.Multiple != 1 {
			for k := range v {
				v[k] = float32(convertFloat(float64(v[k]), t.convert))
			}
		}
		add(t.quantity, wafermap.PackFloat32(t.quantity.Name, wafermap.Gather(v, rows)))
	}
	for _, c := range []struct {
		name string
		k    []int32
	}{{"hard_bin", w.hard}, {"soft_bin", w.soft}, {"test_time_ms", w.time}} {
		if stated := slices.ContainsFunc(c.k, func(k int32) bool { return k != wafermap.Missing32 }); !stated {
			continue
		}
		q, _ := quantity.Lookup(c.name)
		add(q, wafermap.PackScaled(c.name, 0, wafermap.Gather(c.k, rows)))
	}
}

// padded extends results to n rows.
func padded(v []float32, n int) []float32 {
	v = slices.Grow(v, n-len(v))
	for len(v) < n {
		v = append(v, float32(math.NaN()))
	}
	return v
}

// moment is when the wafer's test began: seconds since 1970 on the tester's own
// clock, whose zone the file does not hold.
func (r *stdfReader) moment(w *stdfWafer) (time.Time, error) {
	for _, seconds := range []uint32{w.start, w.finished, r.start} {
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
