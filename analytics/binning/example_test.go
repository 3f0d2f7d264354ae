package binning_test

import (
	"fmt"

	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
)

func Example() {
	spec, err := binning.Parse([]byte(`
specification: harbour-blue
kind: probe
rejects:
  - reason: open
    when: forward_voltage_v > 4.5
axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [450, 452.5, 455, 457.5, 460]
    below: short
    above: long
    guard: 0.05
  - axis: V
    quantity: forward_voltage_v
    edges: [3.0, 3.2, 3.4, 3.6]
bins:
  sellable: ["W2*", "W3*"]
`))
	if err != nil {
		fmt.Println(err)
		return
	}
	planes := []wafermap.Plane{
		wafermap.PackScaled("dominant_wavelength_nm", -2, []int32{45250, 45320, 45900, wafermap.Missing32}),
		wafermap.PackScaled("forward_voltage_v", -2, []int32{310, 320, 360, 480}),
	}
	codes, counts := make([]uint16, 4), make([]int, len(spec.Cells()))
	if err := spec.Bin(codes, counts, binning.PickPlanes(spec, planes), nil); err != nil {
		fmt.Println(err)
		return
	}
	for _, code := range codes {
		cell := spec.Cells()[code]
		fmt.Println(cell.Name, "·", cell.Class, "·", counts[code])
	}
	// Output:
	// guard · reject · 1
	// W2V2 · sellable · 1
	// W4V3 · unsellable · 1
	// untested · untested · 1
}
