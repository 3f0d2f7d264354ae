package jobs

import (
	"fmt"
	"math"
	"slices"
	"time"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/colour"
	"epitally/analytics/derive"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
	"epitally/db"
)

// deriver computes what is stored beside the planes: summaries, small maps,
// tallies and the colour state. It keeps frames and parsed specifications, since
// the wafers of a backlog share a few grids and specs. Not for concurrent use.
type deriver struct {
	frames  map[frameKey]*uniformity.Frame
	binners map[int64]*specBinner
	codes   []uint16
	counts  []int

	more derive.Deriver
}

type frameKey struct {
	grid   [32]byte
	layout wafermap.Layout
}

type specBinner struct {
	spec   *binning.Spec
	binner *binning.Binner
}

// These bound the caches: a frame of a 1-million-die grid is a few MB, and so are
// the tables of one specification.
const (
	maxFrames  = 8
	maxBinners = 16
)

func newDeriver() *deriver {
	return &deriver{frames: map[frameKey]*uniformity.Frame{}, binners: map[int64]*specBinner{}}
}

// dies is what derived numbers are computed from.
type dies struct {
	grid       *wafermap.Grid
	layout     wafermap.Layout
	planes     []wafermap.Plane
	quantities []quantity.Quantity
	kind       string

	measuredAt     time.Time
	driveCurrentMA *float64
	colour         *colour.PeakModel  // the recipe's; nil = the default
	uncertainty    map[string]float64 // the station's, by quantity
}

func (d *deriver) derive(in dies, targets []db.Target, specs []db.Spec) (db.Derived, error) {
	more, err := d.more.Compute(derive.Source{Planes: in.planes, DriveCurrentMA: in.driveCurrentMA, Model: in.colour})
	if err != nil {
		return db.Derived{}, err
	}
	in.planes, in.quantities = slices.Concat(in.planes, more.Planes), slices.Concat(in.quantities, more.Quantities)
	frame := d.frame(in.grid, in.layout)
	out := db.Derived{DerivedFrom: more.From, Suspects: more.Suspects}
	for i := range in.planes {
		p, q := &in.planes[i], in.quantities[i]
		target, window := targetOf(targets, q.Name)
		s := frame.Summarise(p, q, target)
		out.Summaries = append(out.Summaries, s)
		m := frame.Paint(p, s.Q01, s.Q99)
		out.SmallMaps = append(out.SmallMaps, db.SmallMap{Quantity: q, Size: m.Size, Low: m.Low, High: m.High, Cells: m.Cells})
		if !math.IsNaN(target) && (out.State == "" || q.Name == "dominant_wavelength_nm" && more.From[q.Name] == "") {
			out.State = uniformity.ColourState(s, window)
		}
	}
	for _, stored := range specs {
		t, valid, err := d.tally(in, stored, frame)
		if err != nil {
			return db.Derived{}, err
		}
		if !valid {
			continue
		}
		out.Tallies = append(out.Tallies, db.NewTally{SpecID: stored.ID, Tally: t})
	}
	return out, nil
}

func (d *deriver) frame(g *wafermap.Grid, l wafermap.Layout) *uniformity.Frame {
	key := frameKey{g.Hash(), l}
	if f, ok := d.frames[key]; ok {
		return f
	}
	if len(d.frames) >= maxFrames {
		clear(d.frames)
	}
	f := uniformity.NewFrame(g, &l)
	d.frames[key] = f
	return f
}

// tally bins the dies under a specification that is in force on the day they were
// measured; valid is false for any other.
func (d *deriver) tally(in dies, stored db.Spec, frame *uniformity.Frame) (t db.Tally, valid bool, err error) {
	sb, err := d.binner(stored)
	if err != nil || !sb.spec.ValidOn(in.measuredAt) {
		return t, false, err
	}
	n := in.grid.Len()
	if cap(d.codes) < n {
		d.codes = make([]uint16, n)
	}
	cells := sb.spec.Cells()
	if cap(d.counts) < len(cells) {
		d.counts = make([]int, len(cells))
	}
	counts := d.counts[:len(cells)]
	planes := binning.PickPlanes(sb.spec, in.planes)
	if err := sb.binner.Bin(d.codes[:n], counts, planes, frame.Include()); err != nil {
		return t, false, fmt.Errorf("specification %s version %d: %w", stored.Name, stored.Version, err)
	}
	t = db.NewTallyOf(stored.Name, stored.Version, cells, counts, &in.layout)
	if sb.spec.Uncertain(in.uncertainty) {
		risk, err := sb.spec.Conformity(d.codes[:n], planes, frame.Include(), in.uncertainty, binning.Confidence)
		if err != nil {
			return t, false, err
		}
		t.AddRisks(risk)
	}
	return t, true, nil
}

func (d *deriver) binner(stored db.Spec) (*specBinner, error) {
	if sb, ok := d.binners[stored.ID]; ok {
		return sb, nil
	}
	spec, err := binning.Parse([]byte(stored.Document))
	if err != nil {
		return nil, analytics.WithSource(err, fmt.Sprintf("specification %s version %d", stored.Name, stored.Version))
	}
	if len(d.binners) >= maxBinners {
		clear(d.binners)
	}
	sb := &specBinner{spec: spec, binner: spec.NewBinner()}
	d.binners[stored.ID] = sb
	return sb, nil
}

func targetOf(targets []db.Target, quantity string) (value, window float64) {
	for _, t := range targets {
		if t.Quantity == quantity {
			return t.Value, t.Window
		}
	}
	return math.NaN(), math.NaN()
}

// layoutFor is the layout in force for a measurement: the product's, else what
// the source says, completed from the grid's extent and marked as assumed.
func layoutFor(product, source *wafermap.Layout, g *wafermap.Grid) wafermap.Layout {
	if product != nil {
		return *product
	}
	return wafermap.AssumeLayout(g, source)
}

// checkOnWafer refuses a measurement with a die whose centre is off the wafer:
// the wrong product, the wrong pitch or a shifted origin, and none of its
// numbers by place would be true.
func checkOnWafer(g *wafermap.Grid, line []int32, l *wafermap.Layout, wafer string) error {
	if l.Assumed {
		return nil
	}
	for i := range g.X {
		x, y := int(g.X[i]), int(g.Y[i])
		if l.OnWafer(x, y) {
			continue
		}
		f := &analytics.Fault{Offset: -1,
			Problem: fmt.Sprintf("die (%d, %d) of wafer %s lies %.1f mm from the centre, off the %.0f mm wafer of layout %s", x, y, wafer, l.RadiusMM(x, y), l.WaferDiameterMM, l.Name),
			Remedy:  "check the product in the run sheet, the layout's pitch and centre, or the coordinate signs in the reading profile"}
		if line != nil {
			f.Line = int(line[i])
		}
		return f
	}
	return nil
}
