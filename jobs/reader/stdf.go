package reader

import (
	"context"
	"encoding/binary"
	"fmt"
	"io"
	"maps"
	"path"
	"slices"
	"time"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// stdfReader reads STDF V4. Records it does not know are skipped by length.
type stdfReader struct {
	*job
	p       *Profile // nil = none
	rec     *records
	base    about // what the profile and the MIR state
	tests   stdfTests
	parts   map[site]*stdfPart
	wafers  map[uint8]*stdfWafer // open, by head
	waiting *stdfWafer           // closed, held until it is known that no WCR follows it
	wcr     *wafermap.Layout     // what the WCR states, in the profile's coordinates; nil = none seen
	start   uint32               // MIR.START_T
	stop    uint32               // MRR.FINISH_T
	hasMIR  bool
	hasMRR  bool
	zone    *time.Location
	begun   seen // measurements of the file, with the offset of their WIR
	odd     stdfOddities
}

// stdfOddities counts what does not end the reading but should be known. They
// are told once, at the end: a file may hold millions.
type stdfOddities struct {
	unclosed, unopened, stray int // parts never closed, never opened; results outside any part
	strayWRR, empty           int // WRR records without a wafer; wafers without dies
	emptyName                 string
}

// site is where a part is tested: sites work at the same time, and their records
// interleave.
type site struct{ head, number uint8 }

func (j *job) readSTDF(ctx context.Context) error {
	r, err := j.newSTDF()
	if err != nil {
		return err
	}
	return j.ahead(ctx, nil, func(f *feed) error {
		r.rec = &records{feed: f}
		return r.read()
	})
}

// newSTDF makes a reader that knows its profile and has read nothing yet.
func (j *job) newSTDF() (*stdfReader, error) {
	j.res.Format = "stdf"
	p, err := j.profileFor(formatSTDF)
	if err != nil {
		return nil, err
	}
	r := &stdfReader{job: j, p: p, parts: map[site]*stdfPart{}, wafers: map[uint8]*stdfWafer{}, begun: seen{}}
	r.tests = stdfTests{profile: p, byNumber: map[uint32]*stdfNumber{}, names: map[string]bool{}}
	r.base.duplicates = lastWins
	if p != nil {
		if err := p.stateOutside(&r.base, path.Base(j.in.Name), j.moment); err != nil {
			return nil, err
		}
		if p.policySet {
			r.base.duplicates = p.policy
		}
	}
	if r.base.kind == "" {
		r.base.kind = "probe"
	}
	return r, nil
}

func (r *stdfReader) read() error {
	if err := r.begin(); err != nil {
		return err
	}
	for {
		f, err := r.rec.next()
		if err == io.EOF {
			return r.end()
		}
		if err == nil {
			err = r.take(&f)
		}
		if err != nil {
			return err
		}
	}
}

// begin reads the FAR. The byte order is that of its length: files exist whose
// CPU_TYPE says otherwise.
func (r *stdfReader) begin() error {
	head, err := r.rec.take(6)
	if err != nil && err != io.EOF {
		return err
	}
	if len(head) < 6 {
		return &analytics.Fault{Offset: r.rec.at, Problem: "the file is cut in its FAR record", Remedy: "copy the file again from where it was made"}
	}
	r.rec.order = binary.ByteOrder(binary.BigEndian)
	if head[0] == 2 {
		r.rec.order = binary.LittleEndian
	}
	cpu, version := head[4], head[5]
	switch {
	case version != 4:
		return &analytics.Fault{Offset: 5, Problem: fmt.Sprintf("STDF version %d is not read", version), Remedy: "have the tester write version 4"}
	case cpu == 0 && head[0] == 2:
		return &analytics.Fault{Offset: 4, Problem: "the file holds VAX floating-point numbers (CPU_TYPE 0), which are not read", Remedy: "convert it to CPU_TYPE 1 or 2"}
	}
	return nil
}

func (r *stdfReader) take(f *fields) error {
	switch r.rec.kindNow {
	case recPTR:
		return r.parametric(f)
	case recPIR:
		return r.openPart(f)
	case recPRR:
		return r.closePart(f)
	case recMIR:
		return r.about(f)
	case recMRR:
		r.hasMRR, r.stop = true, f.u4(0)
	case recFAR:
		return r.rec.fault("load each file by itself", "a second FAR record: these are several STDF files put one after another")
	case recWIR:
		return r.openWafer(f)
	case recWRR:
		return r.closeWafer(f)
	case recWCR:
		r.geometry(f)
	case recMPR:
		r.notice("multiple-result tests (MPR) are not read")
	}
	return nil
}

// stdfFacts are the fields of the MIR after JOB_NAM's neighbours that are shown,
// in order; "" = not shown.
var stdfFacts = []string{"job revision", "sublot", "operator", "", "", "test code", "temperature", "note", "", "package", "family", "",
	"facility", "floor", "process", "", "test specification", "", "flow", "setup", "design revision"}

// about reads the MIR.
func (r *stdfReader) about(f *fields) error {
	if r.hasMIR {
		return r.rec.fault("load each lot's file by itself", "a second MIR record")
	}
	r.hasMIR = true
	f.u4(0) // SETUP_T
	r.start = f.u4(0)
	f.take(1 + 3 + 2 + 1) // STAT_NUM, MODE_COD, RTST_COD, PROT_COD, BURN_TIM, CMOD_COD
	lot, product, node, tester, job := f.text(), f.note(), f.text(), f.note(), f.note()
	if r.base.lot == "" && lot != "" {
		if err := checkName("lot", lot); err != nil {
			return r.placed(err)
		}
		r.base.lot = lot
	}
	if r.base.station == "" && node != "" {
		if err := checkName("station", node); err != nil {
			return r.placed(err)
		}
		r.base.station = node
	}
	facts := []struct{ key, text string }{{"part type", product}, {"tester", tester}, {"test program", job}}
	for _, key := range stdfFacts {
		facts = append(facts, struct{ key, text string }{key, f.note()})
	}
	for _, fact := range facts {
		if fact.key != "" && fact.text != "" {
			if err := r.base.state(fact.key, fact.text); err != nil {
				return r.placed(err)
			}
		}
	}
	return nil
}

// placed gives a fault the offset of the record at hand.
func (r *stdfReader) placed(err error) error {
	if f, ok := err.(*analytics.Fault); ok && f.Offset < 0 && f.Line == 0 {
		f.Offset = r.rec.offset
	}
	return err
}

// end checks that the file came to its end. A tester writes MIR first and MRR
// last; a file with neither was written by something else.
func (r *stdfReader) end() error {
	if r.hasMIR && !r.hasMRR {
		return &analytics.Fault{Offset: r.rec.at, Problem: "the file ends without its MRR record: it is cut", Remedy: "copy the file again from where it was made"}
	}
	for _, head := range slices.Sorted(maps.Keys(r.wafers)) {
		w := r.wafers[head]
		if !r.hasMRR {
			return &analytics.Fault{Offset: r.rec.at, Problem: fmt.Sprintf("the file ends inside wafer %q: it is cut", w.id), Remedy: "copy the file again from where it was made"}
		}
		w.notices = append(w.notices, "the tester did not close this wafer (no WRR record)")
		if err := r.finish(w); err != nil {
			return err
		}
	}
	if err := r.flush(); err != nil {
		return err
	}
	r.tell()
	if r.res.Wafers == 0 {
		return &analytics.Fault{Offset: r.rec.at, Problem: "the file holds no wafer with dies", Remedy: "check that it is the log of a wafer test that was run"}
	}
	return nil
}

// tell gives notice of what the whole file lacks or holds too much of.
func (r *stdfReader) tell() {
	for _, v := range r.tests.unmet() {
		r.notice("no parametric test of the file gives %s", v)
	}
	for _, name := range slices.Sorted(maps.Keys(r.tests.shared)) {
		r.notice("several tests with different texts fit %s: the first is read; state test_name in the reading profile", name)
	}
	if !r.hasMRR {
		r.notice("the file has no MIR and MRR records: check that it is whole")
	}
	for _, o := range []struct {
		n    int
		text string
	}{
		{r.odd.unclosed, "%d parts were not closed (no PRR record): their results are left out"},
		{r.odd.unopened, "%d parts were not opened (no PIR record): they are read"},
		{r.odd.stray, "%d results stand outside any part: they are left out"},
		{r.odd.strayWRR, "%d WRR records close no open wafer: they are passed over"},
	} {
		if o.n > 0 {
			r.notice(o.text, o.n)
		}
	}
	if r.odd.empty > 0 {
		r.notice("%d wafers have no dies, the first of them %q", r.odd.empty, r.odd.emptyName)
	}
}
