package api

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/web"
)

func (s *Server) pageWafer(c echo.Context) error {
	ctx := c.Request().Context()
	in, m, err := s.waferInput(c)
	if err != nil {
		return err
	}
	if m != nil {
		if in.Grid, err = s.store.Grid(ctx, m.GridHash); err != nil {
			return err
		}
		in.GridURL = "/api/v1/grids/" + m.GridHash
		if err := s.addSpec(c, in, m); err != nil {
			return err
		}
	}
	page := web.NewWaferPage(*in)
	page.Base = s.base(c, page.Base)
	return s.render(c, "wafer", page)
}

// waferInput reads a wafer, the measurement asked for and its summaries.
func (s *Server) waferInput(c echo.Context) (*web.WaferInput, *db.Measurement, error) {
	ctx := c.Request().Context()
	name := pathText(c, "wafer")
	w, err := s.store.Wafer(ctx, name)
	if err != nil {
		return nil, nil, missing(err, "there is no wafer %s: look for it under Wafers", name)
	}
	in := &web.WaferInput{Wafer: w.Name, Zone: s.zone, Shown: queryText(c, "quantity"), View: queryText(c, "view"),
		Growth: web.Growth{Lot: w.Lot, Reactor: w.Reactor, Carrier: w.Carrier, Ring: w.Ring, Pocket: w.Pocket, Recipe: w.Recipe, Product: w.Product, Run: w.Run, GrownAt: w.GrownAt}}
	all, err := s.store.Measurements(ctx, w.ID)
	if err != nil {
		return nil, nil, err
	}
	m, err := chooseMeasurement(c, w.Name, all)
	if m == nil || err != nil {
		return in, nil, err
	}
	for i := range all {
		in.All = append(in.All, measurementInput(&all[i]))
	}
	shown := measurementInput(m)
	in.Measurement = &shown
	summaries, err := s.store.Summaries(ctx, m.ID)
	if err != nil {
		return nil, nil, err
	}
	if err := s.suspectChange(ctx, &shown, m, all, summaries); err != nil {
		return nil, nil, err
	}
	for _, sum := range summaries {
		in.Planes = append(in.Planes, plotted(sum, w.Targets, m.Layout))
	}
	return in, m, nil
}

// suspectChange looks at the measurement of the same kind before: flux that
// changed alone is the tester's doing.
func (s *Server) suspectChange(ctx context.Context, shown *web.MeasurementInput, m *db.Measurement, all []db.Measurement, summaries []db.Summary) error {
	at := slices.IndexFunc(all, func(o db.Measurement) bool { return o.ID == m.ID })
	for i := at + 1; i < len(all); i++ { // newest first
		if all[i].Kind != m.Kind {
			continue
		}
		before, err := s.store.Summaries(ctx, all[i].ID)
		if err != nil {
			return err
		}
		found := colour.CompareMeasurements(medians(&all[i], before), medians(m, summaries))
		for k := range found {
			found[k].Dies, found[k].Of = m.Dies, m.Dies
		}
		shown.Suspects = append(slices.Clone(shown.Suspects), found...)
		return nil
	}
	return nil
}

// medians are a measurement's medians as if it had one die.
func medians(m *db.Measurement, summaries []db.Summary) colour.DieReadings {
	of := func(name string) []float64 {
		for _, s := range summaries {
			if s.Quantity.Name == name && m.DerivedFrom[name] == "" {
				return []float64{s.Summary.Median}
			}
		}
		return nil
	}
	r := colour.DieReadings{RadiantFluxMW: of("radiant_flux_mw"), ForwardVoltageV: of("forward_voltage_v"), CurrentMA: math.NaN()}
	for _, name := range []string{"dominant_wavelength_nm", "peak_wavelength_nm"} {
		if r.WavelengthNM == nil {
			r.WavelengthNM = of(name)
		}
	}
	if m.DriveCurrentMA != nil {
		r.CurrentMA = *m.DriveCurrentMA
	}
	return r
}

// chooseMeasurement is the one asked for, else the newest current one, else the
// newest; nil when the wafer has none.
func chooseMeasurement(c echo.Context, wafer string, all []db.Measurement) (*db.Measurement, error) {
	if text := queryText(c, "measurement"); text != "" {
		id, err := strconv.ParseInt(text, 10, 64)
		for i := range all {
			if err == nil && all[i].ID == id {
				return &all[i], nil
			}
		}
		return nil, fmt.Errorf("wafer %s has no measurement %q: choose one on the wafer's page: %w", wafer, text, analytics.ErrNotFound)
	}
	for i := range all {
		if all[i].Current {
			return &all[i], nil
		}
	}
	if len(all) > 0 {
		return &all[0], nil
	}
	return nil, nil
}

func measurementInput(m *db.Measurement) web.MeasurementInput {
	return web.MeasurementInput{ID: m.ID, Kind: m.Kind, Station: m.Station, MeasuredAt: m.MeasuredAt, DriveCurrentMA: m.DriveCurrentMA, Dies: m.Dies,
		Remeasured: m.Remeasured, Current: m.Current, SourceID: m.SourceID, Layout: m.Layout, Facts: m.Facts, Notices: m.Notices,
		DerivedFrom: m.DerivedFrom, Suspects: m.Suspects}
}

func plotted(s db.Summary, targets []db.Target, l *wafermap.Layout) web.Plotted {
	// The target that the summary was made with, as on the server's pictures.
	p := web.Plotted{Quantity: s.Quantity, Summary: s.Summary, Target: s.Summary.Target, Layout: l}
	for _, t := range targets {
		if t.Quantity == s.Quantity.Name {
			p.Window = t.Window
		}
	}
	return p
}

// addSpec bins the measurement under the specification asked for, else under the
// first that is meant for its product and kind.
func (s *Server) addSpec(c echo.Context, in *web.WaferInput, m *db.Measurement) error {
	ctx := c.Request().Context()
	chosen, err := s.specAsked(c)
	if err != nil {
		return err
	}
	specs, err := s.store.Specs(ctx)
	if err != nil {
		return err
	}
	fits := func(sp *db.Spec) bool {
		return sp.Kind == m.Kind && in.Growth.Product != "" && slices.Contains(sp.Products, in.Growth.Product)
	}
	if chosen == nil {
		for i := range specs {
			if fits(&specs[i]) {
				chosen = &specs[i]
				break
			}
		}
	}
	in.SpecChoices = specOptions(specs, chosen, m.Kind, fits)
	if chosen == nil {
		return nil
	}
	in.Spec, err = s.specInput(ctx, m, chosen)
	var fault *analytics.Fault
	if errors.As(err, &fault) {
		in.Measurement.Notices = append(in.Measurement.Notices, fmt.Sprintf("Specification %s v%d cannot be read: %v", chosen.Name, chosen.Version, fault))
		return nil
	}
	return err
}

// specAsked reads specification=NAME or NAME@VERSION and version=N; nil when
// none is asked for.
func (s *Server) specAsked(c echo.Context) (*db.Spec, error) {
	name, at, _ := strings.Cut(queryText(c, "specification"), "@")
	if name == "" {
		return nil, nil
	}
	if v := queryText(c, "version"); v != "" {
		at = v
	}
	version := 0
	if at != "" {
		n, err := strconv.Atoi(at)
		if err != nil || n < 1 {
			return nil, fmt.Errorf("version %q of specification %s is not a whole number above 0: %w", at, name, analytics.ErrInvalid)
		}
		version = n
	}
	sp, err := s.store.Spec(c.Request().Context(), name, version)
	return sp, missing(err, "there is no such version of a specification %s: see Bins", name)
}

func specOptions(specs []db.Spec, chosen *db.Spec, kind string, fits func(*db.Spec) bool) []web.Option {
	var first, rest []web.Option
	seen := false
	if chosen == nil {
		rest = append(rest, web.Option{Value: "", Label: "choose one", Selected: true})
	}
	for i := range specs {
		sp := &specs[i]
		if sp.Kind != kind && (chosen == nil || sp.Name != chosen.Name) {
			continue
		}
		selected := chosen != nil && chosen.Name == sp.Name && chosen.Version == sp.Version
		seen = seen || selected
		o := web.Option{Value: sp.Name, Label: sp.Name + " v" + strconv.Itoa(sp.Version), Selected: selected}
		if fits(sp) {
			first = append(first, o)
		} else {
			o.Label += " (other product)"
			rest = append(rest, o)
		}
	}
	if chosen != nil && !seen {
		v := strconv.Itoa(chosen.Version)
		first = append(first, web.Option{Value: chosen.Name + "@" + v, Label: chosen.Name + " v" + v + " (older)", Selected: true})
	}
	out := append(first, rest...)
	if chosen == nil && len(out) == 1 {
		return nil
	}
	return out
}

func (s *Server) pageWaferChart(c echo.Context) error {
	ctx := c.Request().Context()
	in, m, err := s.waferInput(c)
	if err != nil {
		return err
	}
	name, isCSV := strings.CutSuffix(c.Param("chart"), ".csv")
	if m == nil || !isCSV {
		return fmt.Errorf("wafer %s has no chart %q: use histogram.csv, radial.csv or bins.csv: %w", in.Wafer, c.Param("chart"), analytics.ErrNotFound)
	}
	file := in.Wafer + "-" + strconv.FormatInt(m.ID, 10) + "-" + name + ".csv"
	switch name {
	case "histogram", "radial":
		return s.summaryChart(c, in, name, file)
	case "bins":
		spec, err := s.specAsked(c)
		if err != nil {
			return err
		}
		if spec == nil {
			return fmt.Errorf("no specification is named: add specification=NAME: %w", analytics.ErrInvalid)
		}
		binned, err := s.specInput(ctx, m, spec)
		if err != nil {
			return err
		}
		return answerChart(c, web.SpecChart(binned, ""), file)
	}
	return fmt.Errorf("there is no chart %q: use histogram, radial or bins: %w", name, analytics.ErrNotFound)
}

func (s *Server) summaryChart(c echo.Context, in *web.WaferInput, name, file string) error {
	for _, p := range in.Planes {
		if p.Quantity.Name != in.Shown {
			continue
		}
		if name == "radial" {
			return answerChart(c, web.RadialChart(p), file)
		}
		return answerChart(c, web.HistogramChart(p), file)
	}
	if !quantity.ValidName(in.Shown) {
		return fmt.Errorf("quantity %q is not a quantity's name: %w", in.Shown, analytics.ErrInvalid)
	}
	return fmt.Errorf("the measurement has no %s: %w", in.Shown, analytics.ErrNotFound)
}

// specInput bins the dies of a measurement now, from its planes.
func (s *Server) specInput(ctx context.Context, m *db.Measurement, spec *db.Spec) (*web.SpecInput, error) {
	b, err := s.bin(ctx, m, spec)
	if err != nil {
		return nil, err
	}
	return &web.SpecInput{Name: spec.Name, Version: spec.Version, Latest: spec.Latest, Cells: b.cells, Counts: b.counts, Codes: b.codes,
		Good: b.tally.Good, Denominator: b.tally.Denominator, OverLayout: b.tally.OverLayout, Confident: b.confident}, nil
}
