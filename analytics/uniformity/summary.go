// Package uniformity summarises one plane: moments, quantiles, robust spread,
// the share near a target, the histogram, the radial profile and the small map
// that lists show.
package uniformity

// Summary of one plane over the dies that count (inside the edge exclusion when
// a layout is known, else all).
type Summary struct {
	N           int     `json:"n"`           // values
	Missing     int     `json:"missing"`     // dies that count but have no value
	Excluded    int     `json:"excluded"`    // dies left out: in the edge exclusion
	Implausible int     `json:"implausible"` // values outside the quantity's plausible range; they stay in every figure
	Mean        float64 `json:"mean"`
	SD          float64 `json:"sd"` // sample standard deviation, divisor n − 1; NaN (null) for n < 2
	Min         float64 `json:"min"`
	Max         float64 `json:"max"`
	// Quantiles are Hyndman and Fan's type 7.
	Q01    float64 `json:"q01"`
	Q05    float64 `json:"q05"`
	Q25    float64 `json:"q25"`
	Median float64 `json:"median"`
	Q75    float64 `json:"q75"`
	Q95    float64 `json:"q95"`
	Q99    float64 `json:"q99"`
	// RobustSD is 1.4826·MAD (median absolute deviation from the median).
	RobustSD float64 `json:"robust_sd"`
	// Target is NaN (null) when the recipe states none; then the shares are NaN too.
	Target  float64 `json:"target"`
	Within1 float64 `json:"within_1"` // share of the N values within ±1 unit of Target (closed)
	Within2 float64 `json:"within_2"`
	Within5 float64 `json:"within_5"`

	Histogram Histogram   `json:"histogram"`
	Radial    []RadialBin `json:"radial"` // empty without a layout
}

// Histogram has equal half-open cells [Low + i·Width, Low + (i+1)·Width); the
// last cell is closed. Below and Above count the values outside.
type Histogram struct {
	Low    float64 `json:"low"`
	Width  float64 `json:"width"`
	Counts []int   `json:"counts"`
	Below  int     `json:"below"`
	Above  int     `json:"above"`
}

// RadialBin is a ring of dies by the distance of their centre from the wafer's centre.
type RadialBin struct {
	InnerMM float64 `json:"inner_mm"`
	OuterMM float64 `json:"outer_mm"` // half-open
	N       int     `json:"n"`
	Mean    float64 `json:"mean"`
	SD      float64 `json:"sd"`
}
