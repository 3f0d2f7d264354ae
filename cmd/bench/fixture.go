package main

import (
	"bufio"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"

	"epitally/analytics/wafermap"
)

// fixture is the files the measurements load: the same rows once as Epitally's
// own CSV and once as plain text for \copy.
type fixture struct {
	dir        string
	wafers     int
	diesEach   int
	dies       int
	own        string // one file of all wafers
	plain      string
	catalogue  string
	runSheet   string
	spec       string
	million    string // one wafer of a million dies
	quantities []string
}

// layoutYAML is a 100 mm wafer whose pitch gives about fifty thousand dies.
const layoutYAML = `catalogue: bench
products:
  - product: bench-038
    layout:
      wafer_diameter_mm: 100
      die_pitch_x_mm: 0.379
      die_pitch_y_mm: 0.379
      edge_exclusion_mm: 2
      mark: flat
      mark_angle_deg: 270
      x_axis: right
      y_axis: up
      centre_x: 0
      centre_y: 0
recipes:
  - recipe: bench-blue
    targets:
      - {quantity: dominant_wavelength_nm, value: 455, window: 2.5}
`

const specYAML = `specification: bench-bins
title: Three axes, three reject rules
kind: probe
products: [bench-038]
rejects:
  - {reason: open, when: forward_voltage_v > 4.5}
  - {reason: short, when: forward_voltage_v < 2.0}
  - {reason: dim, when: radiant_flux_mw < 60}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 452.5, 455, 457.5, 460], below: short of the window, above: long of the window}
  - {axis: F, quantity: radiant_flux_mw, edges: [60, 80, 100, 120, 140], below: too dim, above: too bright}
  - {axis: V, quantity: forward_voltage_v, edges: [2.8, 3.0, 3.2, 3.4, 3.6], below: low voltage, above: high voltage}
bins:
  name: "{W}{F}{V}"
  sellable: all
`

func benchLayout() wafermap.Layout {
	return wafermap.Layout{Name: "bench-038", WaferDiameterMM: 100, DiePitchXMM: 0.379, DiePitchYMM: 0.379,
		EdgeExclusionMM: 2, Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "up"}
}

func newFixture(dir string, wafers int) (*fixture, error) {
	f := &fixture{dir: dir, wafers: wafers,
		quantities: []string{"dominant_wavelength_nm", "fwhm_nm", "radiant_flux_mw", "forward_voltage_v", "reverse_current_ua"}}
	for _, file := range []struct {
		path *string
		name string
		text string
	}{
		{&f.catalogue, "catalogue.yaml", layoutYAML},
		{&f.spec, "bins.yaml", specYAML},
		{&f.runSheet, "runs.csv", runSheet(wafers)},
	} {
		*file.path = filepath.Join(dir, file.name)
		if err := os.WriteFile(*file.path, []byte(file.text), 0o644); err != nil {
			return nil, err
		}
	}
	f.own, f.plain, f.million = filepath.Join(dir, "dies.csv"), filepath.Join(dir, "plain.csv"), filepath.Join(dir, "million.csv")
	if err := f.writeWafers(); err != nil {
		return nil, err
	}
	return f, f.writeMillion()
}

func runSheet(wafers int) string {
	text := "# epitally: run sheet\nwafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product\n"
	for w := range wafers {
		text += fmt.Sprintf("%s,LB-1,Bench,%d,2026-11-01T00:00:00Z,C1,A,%d,bench-blue,bench-038\n", waferName(w), 1+w/10, 1+w%10)
	}
	return text
}

func waferName(w int) string { return fmt.Sprintf("B-%04d", w+1) }

func header(extra, columns string) string {
	return "# epitally: die readings\n# kind: probe\n# lot: LB-1\n# station: bench-prober\n# measured at: 2026-11-05T06:00:00Z\n# drive current: 350 mA\n" + extra + columns
}

func (f *fixture) writeWafers() error {
	own, closeOwn, err := create(f.own)
	if err != nil {
		return err
	}
	plain, closePlain, err := create(f.plain)
	if err != nil {
		return err
	}
	columns := "wafer,x,y,dominant_wavelength_nm,fwhm_nm,radiant_flux_mw,forward_voltage_v,reverse_current_ua\n"
	own.WriteString(header("", columns))
	plain.WriteString(columns)
	layout := benchLayout()
	f.diesEach = layout.Dies()
	f.dies = f.diesEach * f.wafers
	var row []byte
	for w := range f.wafers {
		rng := rand.New(rand.NewPCG(uint64(w), 7))
		each(&layout, func(x, y int) {
			row = append(append(row[:0], waferName(w)...), ',')
			row = appendDie(row, &layout, x, y, rng)
			own.Write(row)
			plain.Write(row)
		})
	}
	if err := closeOwn(); err != nil {
		return err
	}
	return closePlain()
}

// writeMillion writes one 200 mm wafer of about a million dies.
func (f *fixture) writeMillion() error {
	w, done, err := create(f.million)
	if err != nil {
		return err
	}
	layout := wafermap.Layout{WaferDiameterMM: 200, DiePitchXMM: 0.172, DiePitchYMM: 0.172, EdgeExclusionMM: 3,
		Mark: "notch", MarkAngleDeg: 270, XAxis: "right", YAxis: "up"}
	w.WriteString(header("# wafer: B-MILLION\n# pitch: 0.172 x 0.172 mm\n# diameter: 200 mm\n", "x,y,dominant_wavelength_nm,fwhm_nm,radiant_flux_mw,forward_voltage_v,reverse_current_ua\n"))
	rng := rand.New(rand.NewPCG(99, 7))
	var row []byte
	each(&layout, func(x, y int) {
		row = appendDie(row[:0], &layout, x, y, rng)
		w.Write(row)
	})
	return done()
}

func create(path string) (*bufio.Writer, func() error, error) {
	file, err := os.Create(path)
	if err != nil {
		return nil, nil, err
	}
	w := bufio.NewWriterSize(file, 1<<20)
	return w, func() error {
		if err := w.Flush(); err != nil {
			return err
		}
		return file.Close()
	}, nil
}

func each(l *wafermap.Layout, fn func(x, y int)) {
	nx, ny := int(l.WaferDiameterMM/2/l.DiePitchXMM)+1, int(l.WaferDiameterMM/2/l.DiePitchYMM)+1
	for y := -ny; y <= ny; y++ {
		for x := -nx; x <= nx; x++ {
			if l.Inside(x, y) {
				fn(x, y)
			}
		}
	}
}

// appendDie writes x, y and five values: a bowl with noise at the resolution
// and spread of the field (0.01 nm and 1.2 nm, 1 mV and 30 mV, 5 % of light, a
// log-normal leakage).
func appendDie(row []byte, l *wafermap.Layout, x, y int, rng *rand.Rand) []byte {
	r := l.RadiusMM(x, y) / (l.WaferDiameterMM / 2)
	bowl := 3*(r*r-0.5) + 0.3*rng.NormFloat64()
	row = strconv.AppendInt(row, int64(x), 10)
	row = strconv.AppendInt(append(row, ','), int64(y), 10)
	row = decimal(row, 455+bowl, 2)
	row = decimal(row, 19+0.2*bowl+0.1*rng.NormFloat64(), 2)
	row = decimal(row, 100*(1-0.02*bowl)*(1+0.04*rng.NormFloat64()), 2)
	row = decimal(row, 3.15-0.01*bowl+0.025*rng.NormFloat64(), 3)
	row = decimal(row, 0.02*math.Exp(0.8*rng.NormFloat64()), 3)
	return append(row, '\n')
}

func decimal(row []byte, v float64, places int) []byte {
	return strconv.AppendFloat(append(row, ','), v, 'f', places, 64)
}
