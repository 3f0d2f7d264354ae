package simfab

import (
	"math"
	"time"
)

// Truth is everything the fab was grown from, for tests to compare with what a
// program finds in its files. Offsets are of the photoluminescence peak, in nm.
type Truth struct {
	Seed     uint64         `json:"seed"`
	End      time.Time      `json:"end"`
	Reactors []ReactorTruth `json:"reactors"`
	Stations []StationTruth `json:"stations"`
	Wafers   []WaferTruth   `json:"wafers"`
}

// ReactorTruth is one reactor: its state in the words of the pages, and why.
type ReactorTruth struct {
	Name     string         `json:"name"`
	State    string         `json:"state"` // steady, walking or stepped
	Recipe   string         `json:"recipe"`
	Walk     *WalkTruth     `json:"walk,omitempty"`
	Step     *StepTruth     `json:"step,omitempty"`
	LongRing *RingTruth     `json:"long_ring,omitempty"`
	Carriers []CarrierTruth `json:"carriers"`
	Runs     []RunTruth     `json:"runs"`
}

// WalkTruth is a drift of so much per run after the run SinceRun.
type WalkTruth struct {
	SinceRun int     `json:"since_run"`
	NMPerRun float64 `json:"nm_per_run"`
}

// StepTruth is a step from the run FirstRun on, made by a maintenance at At.
type StepTruth struct {
	FirstRun int       `json:"first_run"`
	At       time.Time `json:"at"`
	NM       float64   `json:"nm"`
}

// RingTruth is a ring that went wrong in one run.
type RingTruth struct {
	Run  int     `json:"run"`
	Ring string  `json:"ring"`
	NM   float64 `json:"nm"`
}

// CarrierTruth is the signature of a carrier.
type CarrierTruth struct {
	Name    string        `json:"name"`
	Pockets []PocketTruth `json:"pockets"`
}

// PocketTruth is how far one pocket grows from the carrier's mean.
type PocketTruth struct {
	Ring   string  `json:"ring"`
	Pocket int     `json:"pocket"`
	NM     float64 `json:"offset_nm"`
}

// RunTruth is the offset of one run; DriftNM is the part that is not scatter.
type RunTruth struct {
	Run      int       `json:"run"`
	GrownAt  time.Time `json:"grown_at"`
	Carrier  string    `json:"carrier"`
	OffsetNM float64   `json:"offset_nm"`
	DriftNM  float64   `json:"drift_nm"`
}

// StationTruth is how far a station reads from the truth.
type StationTruth struct {
	Name         string  `json:"name"`
	WavelengthNM float64 `json:"wavelength_nm"`
	VoltageV     float64 `json:"voltage_v"`
	LightRatio   float64 `json:"light_ratio"` // reads (1 + this) times the light
}

// WaferTruth is one measured wafer: true means over its dies, before station
// and noise, and what is wrong with it.
type WaferTruth struct {
	Wafer          string  `json:"wafer"`
	Reactor        string  `json:"reactor"`
	Run            int     `json:"run"`
	Carrier        string  `json:"carrier"`
	Ring           string  `json:"ring"`
	Pocket         string  `json:"pocket"`
	MeanPeakNM     float64 `json:"mean_pl_peak_nm"`
	MeanDominantNM float64 `json:"mean_dominant_nm"`
	Dies           int     `json:"probed_dies"`
	Absent         int     `json:"absent_dies"` // on the wafer and mapped, but not probed
	Opens          int     `json:"opens"`
	Shorts         int     `json:"shorts"`
	Leaky          int     `json:"leaky"`
	Clusters       int     `json:"clusters"`
	Scratches      int     `json:"scratches"`
	Chipped        bool    `json:"chipped,omitempty"`
	StoppedEarly   bool    `json:"stopped_early,omitempty"`
	BadlySeated    bool    `json:"badly_seated,omitempty"`
	OffCentreXMM   float64 `json:"off_centre_x_mm,omitempty"`
	OffCentreYMM   float64 `json:"off_centre_y_mm,omitempty"`
}

// Truth gives what the fab was grown from, and the truth of the wafers measured
// so far. It must not run while wafers are measured.
func (f *Fab) Truth() Truth {
	t := Truth{Seed: f.config.Seed, End: f.config.End}
	for i := range f.plans {
		t.Reactors = append(t.Reactors, f.reactorTruth(&f.plans[i]))
	}
	for _, name := range []string{"mapper-1", "mapper-2", "prober-1", "prober-2", "prober-3"} {
		s := f.stations[name]
		t.Stations = append(t.Stations, StationTruth{name, micro(s.wavelengthNM), micro(s.voltageV), micro(s.lightRatio)})
	}
	for _, w := range f.truth {
		if w.Wafer != "" {
			w.MeanPeakNM, w.MeanDominantNM = micro(w.MeanPeakNM), micro(w.MeanDominantNM)
			t.Wafers = append(t.Wafers, w)
		}
	}
	return t
}

func (f *Fab) reactorTruth(p *reactorPlan) ReactorTruth {
	t := ReactorTruth{Name: p.name, State: "steady", Recipe: p.recipe}
	var runs []*Run
	for i := range f.Runs {
		if r := &f.Runs[i]; r.Reactor == p.name {
			runs = append(runs, r)
			t.Runs = append(t.Runs, RunTruth{r.Number, r.GrownAt, r.Carrier, micro(r.OffsetNM), micro(r.DriftNM)})
		}
	}
	if from := p.walkStart(len(runs)); p.walkNM != 0 && len(runs) > from+1 {
		t.State, t.Walk = "walking", &WalkTruth{SinceRun: p.firstRun + from, NMPerRun: p.walkNM}
	}
	if at := p.changeAt(len(runs)); p.stepNM != 0 && at > 0 && at < len(runs) {
		before, after := runs[at-1].GrownAt, runs[at].GrownAt
		t.State, t.Step = "stepped", &StepTruth{FirstRun: runs[at].Number, At: before.Add(after.Sub(before) / 3).Truncate(time.Minute), NM: p.stepNM}
	}
	if p.longRingNM != 0 && len(runs) > longRingRun {
		t.LongRing = &RingTruth{Run: runs[longRingRun].Number, Ring: p.rings[0].name, NM: p.longRingNM}
	}
	scale := f.recipe(p.recipe).optics.nmPerDegC
	for _, name := range p.carriers {
		c, i := CarrierTruth{Name: name}, 0
		for _, ring := range p.rings {
			for k := range ring.pockets {
				c.Pockets = append(c.Pockets, PocketTruth{ring.name, k + 1, micro(-scale * f.carriers[name].degC[i])})
				i++
			}
		}
		t.Carriers = append(t.Carriers, c)
	}
	return t
}

// micro rounds to six decimals, so that the truth file holds no digits that two
// machines could compute differently.
func micro(v float64) float64 { return math.Round(v*1e6) / 1e6 }
