package uniformity_test

import (
	"fmt"
	"math"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

func ExampleDescribe() {
	s := uniformity.Describe([]float64{454.2, 455.1, math.NaN(), 455.4, 456.9, 455.0}, 455)
	fmt.Printf("n %d, missing %d, mean %.2f, sd %.3f, median %.2f, robust sd %.3f, within ±1 %.0f %%\n",
		s.N, s.Missing, s.Mean, s.SD, s.Median, s.RobustSD, 100*s.Within1)
	fmt.Println(uniformity.ColourState(s, 1))
	// Output:
	// n 5, missing 1, mean 455.32, sd 0.988, median 455.10, robust sd 0.445, within ±1 80 %
	// on colour
}

func ExampleFrame_Summarise() {
	grid := &wafermap.Grid{X: []int16{-1, 0, 1}, Y: []int16{0, 0, 0}}
	plane := wafermap.PackScaled("forward_voltage_v", -3, []int32{3101, 3118, wafermap.Missing32})
	q, _ := quantity.Lookup("forward_voltage_v")
	s := uniformity.NewFrame(grid, nil).Summarise(&plane, q, math.NaN())
	fmt.Printf("n %d, missing %d, mean %g V\n", s.N, s.Missing, s.Mean)
	// Output:
	// n 2, missing 1, mean 3.1095 V
}

func ExampleQuantile() {
	fmt.Println(uniformity.Quantile([]float64{1, 2, 4, 8}, 0.25))
	// Output: 1.75
}

func ExampleLag1Autocorrelation() {
	fmt.Println(uniformity.Lag1Autocorrelation([]float64{1, 2, 1, 2}))
	// Output: -0.75
}
