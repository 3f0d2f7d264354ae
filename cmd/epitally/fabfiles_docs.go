package main

import (
	"fmt"
	"time"

	"epitally/analytics/simfab"
)

// fabDocuments gives the fab's documents and run sheets: file name → text.
func fabDocuments(f *simfab.Fab) map[string][]byte {
	files := map[string][]byte{
		"documents/catalogue.yaml":        catalogue(f),
		"documents/profile-prober-3.yaml": []byte(otherProfile),
	}
	for name, text := range fabSpecifications() {
		files["documents/"+name+".yaml"] = []byte(text)
	}
	for reactor, sheet := range runSheets(f) {
		files["runs/"+reactor+".csv"] = sheet
	}
	return files
}

// catalogue lists the products with their layouts, and the recipes with what
// they aim at.
func catalogue(f *simfab.Fab) []byte {
	b := []byte("catalogue: demo fab\nproducts:\n")
	for _, p := range f.Products {
		l := p.Layout
		b = fmt.Appendf(b, "  - product: %s\n    layout:\n      name: %s\n      wafer_diameter_mm: %g\n", p.Name, l.Name, l.WaferDiameterMM)
		b = fmt.Appendf(b, "      die_pitch_x_mm: %g\n      die_pitch_y_mm: %g\n      edge_exclusion_mm: %g\n", l.DiePitchXMM, l.DiePitchYMM, l.EdgeExclusionMM)
		b = fmt.Appendf(b, "      mark: %s\n      mark_angle_deg: %g\n      x_axis: %s\n      y_axis: %s\n", l.Mark, l.MarkAngleDeg, l.XAxis, l.YAxis)
		b = fmt.Appendf(b, "      centre_x: %g\n      centre_y: %g\n", l.CentreX, l.CentreY)
	}
	b = append(b, "recipes:\n"...)
	for _, r := range f.Recipes {
		b = fmt.Appendf(b, "  - recipe: %s\n    targets:\n", r.Name)
		b = fmt.Appendf(b, "      - {quantity: peak_wavelength_nm, value: %g, window: %g}\n", r.PLPeakNM, r.PLWindowNM)
		b = fmt.Appendf(b, "      - {quantity: dominant_wavelength_nm, value: %g, window: %g}\n", r.DominantNM, r.DominantWindowNM)
		if r.Name == "blue-455" {
			b = append(b, "    colour: {reference_nm: 452.4, offset_nm: 2.57, slope: -0.15, residual_nm: 0.6, fitted_to: 40 wafers mapped and probed}\n"...)
		}
	}
	return append(b, stationUncertainties...)
}

// stationUncertainties are what the stations say of one reading (common practice).
const stationUncertainties = `stations:
  - station: prober-1
    uncertainty: {dominant_wavelength_nm: 0.12, forward_voltage_v: 0.004, radiant_flux_mw: 4}
  - station: prober-2
    uncertainty: {dominant_wavelength_nm: 0.12, forward_voltage_v: 0.004}
`

// otherProfile is the reading profile for the files of the other station.
const otherProfile = `profile: prober-3
format: delimited
match: ["P3_*.txt"]
delimiter: ";"
decimal: ","
header: {with: [ROW, COL]}
columns: {x: COL, y: ROW}
quantities:
  - {quantity: forward_voltage_v, column: "VF (mV)", unit: mV}
  - {quantity: low_current_forward_voltage_v, column: "VFL (mV)", unit: mV}
  - {quantity: reverse_current_ua, column: "IR (nA)", unit: nA}
  - {quantity: radiant_flux_mw, column: "PO (uW)", unit: uW}
  - {quantity: dominant_wavelength_nm, column: "WLD (nm)", unit: nm}
constants: {kind: probe, station: prober-3}
facts:
  wafer: {label: WAFER}
  lot: {label: LOT}
  measured_at: {label: STARTED}
  drive_current: {label: CURRENT}
time:
  layouts: ["yyyy-MM-dd HH:mm"]
  zone: Asia/Taipei
missing: ["---"]
`

// runSheets gives one run sheet per reactor.
func runSheets(f *simfab.Fab) map[string][]byte {
	sheets := map[string][]byte{}
	for i := range f.Wafers {
		w := &f.Wafers[i]
		b := sheets[w.Run.Reactor]
		if b == nil {
			b = []byte("# epitally: run sheet\nwafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product\n")
		}
		sheets[w.Run.Reactor] = fmt.Appendf(b, "%s,%s,%s,%d,%s,%s,%s,%s,%s,%s\n", w.Name, w.Lot, w.Run.Reactor, w.Run.Number,
			w.Run.GrownAt.Format(time.RFC3339), w.Run.Carrier, w.Ring, w.Pocket, w.Recipe.Name, w.Product.Name)
	}
	return sheets
}
