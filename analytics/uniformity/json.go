package uniformity

import (
	"encoding/json"
	"math"
	"strconv"
)

// nullable is a float64 whose NaN is null in JSON. Infinities, which no summary
// holds, are null too.
type nullable float64

func (v nullable) MarshalJSON() ([]byte, error) {
	f := float64(v)
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return []byte("null"), nil
	}
	return strconv.AppendFloat(nil, f, 'g', -1, 64), nil
}

func (v *nullable) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*v = nullable(math.NaN())
		return nil
	}
	return json.Unmarshal(b, (*float64)(v))
}

// summaryJSON mirrors Summary; field for field, so that a key missing here is
// found by the round-trip test.
type summaryJSON struct {
	N           int         `json:"n"`
	Missing     int         `json:"missing"`
	Excluded    int         `json:"excluded"`
	Implausible int         `json:"implausible"`
	Mean        nullable    `json:"mean"`
	SD          nullable    `json:"sd"`
	Min         nullable    `json:"min"`
	Max         nullable    `json:"max"`
	Q01         nullable    `json:"q01"`
	Q05         nullable    `json:"q05"`
	Q25         nullable    `json:"q25"`
	Median      nullable    `json:"median"`
	Q75         nullable    `json:"q75"`
	Q95         nullable    `json:"q95"`
	Q99         nullable    `json:"q99"`
	RobustSD    nullable    `json:"robust_sd"`
	Target      nullable    `json:"target"`
	Within1     nullable    `json:"within_1"`
	Within2     nullable    `json:"within_2"`
	Within5     nullable    `json:"within_5"`
	Histogram   Histogram   `json:"histogram"`
	Radial      []RadialBin `json:"radial"`
}

// MarshalJSON writes NaN as null.
func (s Summary) MarshalJSON() ([]byte, error) {
	j := summaryJSON{N: s.N, Missing: s.Missing, Excluded: s.Excluded, Implausible: s.Implausible, Histogram: s.Histogram, Radial: s.Radial}
	for _, f := range s.pairs(&j) {
		*f.json = nullable(*f.value)
	}
	if j.Radial == nil {
		j.Radial = []RadialBin{}
	}
	return json.Marshal(j)
}

// UnmarshalJSON reads null, and a key that is absent, as NaN.
func (s *Summary) UnmarshalJSON(b []byte) error {
	j := summaryJSON{Histogram: Histogram{Low: math.NaN(), Width: math.NaN()}}
	pairs := s.pairs(&j)
	for _, f := range pairs {
		*f.json = nullable(math.NaN())
	}
	if err := json.Unmarshal(b, &j); err != nil {
		return err
	}
	for _, f := range pairs {
		*f.value = float64(*f.json)
	}
	s.N, s.Missing, s.Excluded, s.Implausible, s.Histogram, s.Radial = j.N, j.Missing, j.Excluded, j.Implausible, j.Histogram, j.Radial
	return nil
}

type floatPair struct {
	value *float64
	json  *nullable
}

func (s *Summary) pairs(j *summaryJSON) []floatPair {
	return []floatPair{
		{&s.Mean, &j.Mean}, {&s.SD, &j.SD}, {&s.Min, &j.Min}, {&s.Max, &j.Max},
		{&s.Q01, &j.Q01}, {&s.Q05, &j.Q05}, {&s.Q25, &j.Q25}, {&s.Median, &j.Median},
		{&s.Q75, &j.Q75}, {&s.Q95, &j.Q95}, {&s.Q99, &j.Q99}, {&s.RobustSD, &j.RobustSD},
		{&s.Target, &j.Target}, {&s.Within1, &j.Within1}, {&s.Within2, &j.Within2}, {&s.Within5, &j.Within5},
	}
}

type histogramJSON struct {
	Low    nullable `json:"low"`
	Width  nullable `json:"width"`
	Counts []int    `json:"counts"`
	Below  int      `json:"below"`
	Above  int      `json:"above"`
}

// MarshalJSON writes NaN, the low end of an empty histogram, as null.
func (h Histogram) MarshalJSON() ([]byte, error) {
	j := histogramJSON{nullable(h.Low), nullable(h.Width), h.Counts, h.Below, h.Above}
	if j.Counts == nil {
		j.Counts = []int{}
	}
	return json.Marshal(j)
}

// UnmarshalJSON reads null as NaN.
func (h *Histogram) UnmarshalJSON(b []byte) error {
	j := histogramJSON{Low: nullable(math.NaN()), Width: nullable(math.NaN())}
	if err := json.Unmarshal(b, &j); err != nil {
		return err
	}
	*h = Histogram{float64(j.Low), float64(j.Width), j.Counts, j.Below, j.Above}
	return nil
}

type radialJSON struct {
	InnerMM nullable `json:"inner_mm"`
	OuterMM nullable `json:"outer_mm"`
	N       int      `json:"n"`
	Mean    nullable `json:"mean"`
	SD      nullable `json:"sd"`
}

// MarshalJSON writes NaN, the mean of an empty ring, as null.
func (r RadialBin) MarshalJSON() ([]byte, error) {
	return json.Marshal(radialJSON{nullable(r.InnerMM), nullable(r.OuterMM), r.N, nullable(r.Mean), nullable(r.SD)})
}

// UnmarshalJSON reads null as NaN.
func (r *RadialBin) UnmarshalJSON(b []byte) error {
	nan := nullable(math.NaN())
	j := radialJSON{nan, nan, 0, nan, nan}
	if err := json.Unmarshal(b, &j); err != nil {
		return err
	}
	*r = RadialBin{float64(j.InnerMM), float64(j.OuterMM), j.N, float64(j.Mean), float64(j.SD)}
	return nil
}
