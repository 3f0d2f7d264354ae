package colour_test

import (
	"fmt"

	"epitally/analytics/colour"
)

// A blue die by its chromaticity, against equal-energy white.
func ExampleDominantOf() {
	d, err := colour.DominantOf(colour.XY{X: 0.18745, Y: 0.08486}, colour.WhiteE)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.2f nm, purity %.3f, complementary %t\n", d.WavelengthNM, d.ExcitationPurity, d.Complementary)
	_, err = colour.DominantOf(colour.WhiteE, colour.WhiteE)
	why, meaningless := colour.Meaningless(err)
	fmt.Println(meaningless, why)
	// Output:
	// 455.00 nm, purity 0.800, complementary false
	// true x 0.3333, y 0.3333 is 0.0000 from white (0.3333, 0.3333), too near for a dominant wavelength
}

// Many dies at once: complementary wavelengths are negative, NaN is no value.
func ExampleDominantTable_Wavelengths() {
	table, err := colour.NewDominantTable(colour.WhiteE)
	if err != nil {
		fmt.Println(err)
		return
	}
	x, y := []float64{0.18745, 0.4, 1. / 3}, []float64{0.08486, 0.2, 1. / 3}
	nm, purity := make([]float64, 3), make([]float64, 3)
	table.Wavelengths(nm, purity, x, y)
	fmt.Printf("%.2f %.3f\n", nm, purity)
	// Output:
	// [455.00 -521.12 NaN] [0.800 0.645 NaN]
}

// A blue line at 5 nm steps.
func ExampleNewSpectrum() {
	s, err := colour.NewSpectrum(
		[]float64{430, 435, 440, 445, 450, 455, 460, 465, 470, 475, 480},
		[]float64{0, 0.01, 0.06, 0.25, 0.73, 1, 0.7, 0.3, 0.1, 0.02, 0})
	if err != nil {
		fmt.Println(err)
		return
	}
	_, _, width, err := s.FWHM()
	if err != nil {
		fmt.Println(err)
		return
	}
	p := s.XYZ().XY()
	fmt.Printf("peak %.1f nm, centroid %.1f nm, width %.1f nm\n", s.PeakNM(), s.CentroidNM(), width)
	fmt.Printf("x %.4f, y %.4f, %.1f lm/W\n", p.X, p.Y, s.LuminousEfficacy())
	_, err = colour.NewSpectrum([]float64{430, 440, 435, 450, 460}, []float64{0, 1, 1, 1, 0})
	fmt.Println(err)
	// Output:
	// peak 454.8 nm, centroid 455.4 nm, width 14.9 nm
	// x 0.1498, y 0.0246, 34.5 lm/W
	// row 3: wavelength 435 nm does not follow 440 nm; sort the rows by wavelength: invalid input
}

// Daylight is a little above the Planckian locus.
func ExampleCCTOf() {
	c, err := colour.CCTOf(colour.WhiteD65)
	fmt.Printf("%.0f K, D_uv %.4f, %v\n", c.K, c.Duv, err)
	// Output:
	// 6503 K, D_uv 0.0032, <nil>
}

// The chromaticity of a colour temperature, and back.
func ExampleXYFromCCT() {
	p, err := colour.XYFromCCT(colour.CCT{K: 2725})
	fmt.Printf("x %.4f, y %.4f, %v\n", p.X, p.Y, err)
	// Output:
	// x 0.4578, y 0.4101, <nil>
}

// The basic quadrangle of 4000 K, and one of four steps inside it.
func ExampleQuadrangleSteps() {
	for _, steps := range []int{7, 4} {
		q, err := colour.QuadrangleSteps(4000, 2015, steps)
		fmt.Printf("%.4f %v\n", q, err)
	}
	// Output:
	// [{0.4003 0.4035} {0.3737 0.3880} {0.3671 0.3583} {0.3895 0.3709}] <nil>
	// [{0.3918 0.3930} {0.3772 0.3845} {0.3730 0.3672} {0.3863 0.3747}] <nil>
}

// How far a lamp is from its target, in steps of CIE TN 001.
func ExampleStepsFrom() {
	fmt.Printf("%.2f\n", colour.StepsFrom(colour.XY{X: 0.4578, Y: 0.4101}, colour.XY{X: 0.46, Y: 0.411}))
	// Output:
	// 1.11
}
