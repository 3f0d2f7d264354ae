package simfab

import (
	"fmt"
	"time"

	"epitally/analytics/wafermap"
)

// Config says which fab to grow.
type Config struct {
	Seed   uint64
	Wafers int       // at least 1; below that counts as 1
	End    time.Time // nothing happens after it; zero = DefaultEnd
}

// DefaultEnd is when the invented records end, unless Config says otherwise. It
// is a constant so that the same seed gives the same files on any day.
func DefaultEnd() time.Time {
	return time.Date(2026, 11, 30, 6, 0, 0, 0, time.FixedZone("", 8*3600))
}

// Run is one growth run.
type Run struct {
	Reactor  string
	Number   int
	GrownAt  time.Time // its end
	Carrier  string
	Recipe   string
	Product  string
	OffsetNM float64 // of the run as a whole: scatter, drift and step
	DriftNM  float64 // the part that is not scatter
	index    int     // of the reactor's runs, from 0
	plan     *reactorPlan
	carrier  *carrier
}

// Wafer is one wafer, from growth to its two measurements.
type Wafer struct {
	Name, Lot    string
	Run          *Run
	Ring, Pocket string
	Product      *Product
	Recipe       *Recipe
	MappedAt     time.Time
	Mapper       string
	ProbedAt     time.Time
	Prober       string

	index     int
	pocket    int  // of the carrier's pockets, all rings in order
	outermost bool // in the first ring
	offCentre bool // the demo's one wafer whose dies were printed off centre
}

// Fab is a grown fab. It is read-only after New but for the truth of measured
// wafers, so that different wafers may be measured at the same time.
type Fab struct {
	Products []Product
	Recipes  []Recipe
	Runs     []Run // by reactor, then number
	Wafers   []Wafer

	config   Config
	plans    []reactorPlan
	carriers map[string]*carrier
	stations map[string]station
	dice     map[string]*dice
	hues     map[string]*hue // of recipes whose prober reads x and y
	truth    []WaferTruth
}

// New grows the plan of a fab; dies are computed by Measure.
func New(c Config) *Fab {
	c.Wafers = max(c.Wafers, 1)
	if c.End.IsZero() {
		c.End = DefaultEnd()
	}
	f := &Fab{Products: products(), Recipes: recipes(), config: c, plans: reactorPlans(),
		stations: growStations(c.Seed), dice: map[string]*dice{}, hues: map[string]*hue{}, truth: make([]WaferTruth, c.Wafers)}
	for i := range f.Recipes {
		if r := &f.Recipes[i]; r.optics.colorimeter {
			f.hues[r.Name] = newHue(r)
		}
	}
	f.growCarriers()
	loads := f.planLoads()
	f.growRuns(loads)
	f.growWafers(loads)
	for i := range f.Products {
		p := &f.Products[i]
		f.dice[p.Name] = newDice(p, 0, 0)
	}
	return f
}

// load is which pockets of one run hold wafers of the records.
type load struct {
	plan    *reactorPlan
	run     int // index in the reactor's runs
	pockets []int
}

// fullEvery is how often a run is mapped in every pocket; the others carry
// dummies in most pockets, which the records leave out.
const fullEvery = 8

// planLoads takes the reactors in turn until there are wafers enough. Pockets
// rotate, so that each is seen again and again.
func (f *Fab) planLoads() []load {
	var loads []load
	for round, left := 0, f.config.Wafers; left > 0; round++ {
		for i := range f.plans {
			plan := &f.plans[i]
			total, n, stride := plan.pockets(), plan.partial, 1
			if round%fullEvery == 3 {
				n = total
			} else {
				stride = total / plan.partial
			}
			l := load{plan: plan, run: round}
			for j := range min(n, left) {
				l.pockets = append(l.pockets, (3*round+j*stride)%total)
			}
			if left -= len(l.pockets); len(l.pockets) > 0 {
				loads = append(loads, l)
			}
		}
	}
	return loads
}

func (p *reactorPlan) pockets() (n int) {
	for _, r := range p.rings {
		n += r.pockets
	}
	return n
}

func (f *Fab) growRuns(loads []load) {
	total := map[string]int{}
	for _, l := range loads {
		total[l.plan.name]++
	}
	for i := range f.plans {
		plan := &f.plans[i]
		n := total[plan.name]
		for k := range n {
			f.Runs = append(f.Runs, f.growRun(plan, i, k, n))
		}
	}
}

func (f *Fab) growRun(plan *reactorPlan, reactor, k, n int) Run {
	r := stream(f.config.Seed, forRun, uint64(reactor)<<24|uint64(k))
	// About a run a day, closer together when there are many.
	interval := min(max(24*24*time.Hour/time.Duration(n), 8*time.Hour), 22*time.Hour)
	late := time.Duration(n-1-k)*interval + time.Duration(reactor)*5*time.Hour + time.Duration(r.IntN(120))*time.Minute
	run := Run{Reactor: plan.name, Number: plan.firstRun + k, GrownAt: f.config.End.Add(-88*time.Hour - late).Truncate(time.Minute),
		Recipe: plan.recipe, Product: plan.products[0], index: k, plan: plan}
	if len(plan.products) > 1 && k%fullEvery == 6 {
		run.Product = plan.products[1]
	}
	run.Carrier = plan.carriers[0]
	if len(plan.carriers) > 1 && k >= plan.changeAt(n) {
		run.Carrier = plan.carriers[1]
	}
	run.carrier = f.carriers[run.Carrier]
	if from := plan.walkStart(n); plan.walkNM != 0 && k > from {
		run.DriftNM = plan.walkNM * float64(k-from)
	}
	if plan.stepNM != 0 && k >= plan.changeAt(n) {
		run.DriftNM += plan.stepNM
	}
	run.OffsetNM = run.DriftNM + f.recipe(plan.recipe).optics.runNM*r.NormFloat64()
	return run
}

// changeAt is the first of n runs after the reactor's maintenance or change of carrier.
func (p *reactorPlan) changeAt(n int) int {
	if p.stepAt > 0 {
		return int(p.stepAt * float64(n))
	}
	return n / 2
}

// walkStart is the last of n runs before the reactor begins to walk.
func (p *reactorPlan) walkStart(n int) int { return int(p.walkFrom * float64(n)) }

func (f *Fab) growWafers(loads []load) {
	runs := map[string]*Run{}
	for i := range f.Runs {
		runs[fmt.Sprint(f.Runs[i].Reactor, f.Runs[i].index)] = &f.Runs[i]
	}
	made := map[string]int{}
	for _, l := range loads {
		run := runs[fmt.Sprint(l.plan.name, l.run)]
		for slot, pocket := range l.pockets {
			w := f.growWafer(run, slot, pocket, made[run.Product])
			made[run.Product]++
			f.Wafers = append(f.Wafers, w)
		}
	}
	for i := f.config.Wafers * 55 / 100; i < len(f.Wafers); i++ {
		if f.Wafers[i].Run.plan.stepNM != 0 {
			f.Wafers[i].offCentre = true
			break
		}
	}
}

// lotSize is how many wafers travel together.
const lotSize = 12

func (f *Fab) growWafer(run *Run, slot, pocket, made int) Wafer {
	p := f.product(run.Product)
	w := Wafer{Lot: fmt.Sprintf("%s-%04d", p.lots, p.firstLot+made/lotSize), Run: run, Product: p, Recipe: f.recipe(run.Recipe),
		MappedAt: run.GrownAt.Add(3*time.Hour + time.Duration(slot)*4*time.Minute), Mapper: run.plan.mapper,
		ProbedAt: run.GrownAt.Add(61*time.Hour + time.Duration(slot)*23*time.Minute), Prober: run.plan.prober,
		index: len(f.Wafers), pocket: pocket}
	w.Name = fmt.Sprintf("%s-%02d", w.Lot, made%lotSize+1)
	if run.plan.other != "" && made%4 == 3 {
		w.Prober = run.plan.other
	}
	left := pocket
	for i, r := range run.plan.rings {
		if left < r.pockets {
			w.Ring, w.Pocket, w.outermost = r.name, fmt.Sprint(left+1), i == 0
			break
		}
		left -= r.pockets
	}
	return w
}

func (f *Fab) product(name string) *Product {
	for i := range f.Products {
		if f.Products[i].Name == name {
			return &f.Products[i]
		}
	}
	panic("simfab: the scenario names no product " + name)
}

func (f *Fab) recipe(name string) *Recipe {
	for i := range f.Recipes {
		if f.Recipes[i].Name == name {
			return &f.Recipes[i]
		}
	}
	panic("simfab: the scenario names no recipe " + name)
}

// Reading is what one station read on one wafer. Every column has a value for
// every die, in the order of X and Y: y ascending, then x ascending.
type Reading struct {
	Wafer          *Wafer
	Kind           string
	Station        string
	MeasuredAt     time.Time
	DriveCurrentMA float64 // 0 = none
	Layout         *wafermap.Layout
	X, Y           []int16
	Columns        []Column
}

// NoValue marks a die without a value in a column.
const NoValue = -1 << 31

// Column is one quantity as the station writes it: K·10^−Decimals.
type Column struct {
	Quantity string
	Decimals int
	K        []int32
}
