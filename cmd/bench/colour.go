package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"math"
	"math/rand/v2"
	"net/http/httptest"
	"sort"
	"strings"
	"time"

	"github.com/chromedp/chromedp"
	"golang.org/x/sync/errgroup"

	"epitally/analytics/binning"
	"epitally/analytics/colour"
	"epitally/analytics/wafermap"
	"epitally/api"
	"epitally/web"
)

// colourDies is how many dies the colour figures are measured on.
const colourDies = 1_000_000

// measureColour times the colour of every die on one core, and holds it to the
// direct computation.
func (b *bench) measureColour(_ context.Context) error {
	rng := rand.New(rand.NewPCG(3, 1))
	x, y := make([]float64, colourDies), make([]float64, colourDies)
	peak, fwhm := make([]float64, colourDies), make([]float64, colourDies)
	for i := range x { // a blue wafer
		p, s := colour.Locus(452+3*rng.NormFloat64()), 0.95+0.04*rng.Float64()
		x[i], y[i] = colour.WhiteE.X+s*(p.X-colour.WhiteE.X), colour.WhiteE.Y+s*(p.Y-colour.WhiteE.Y)
		peak[i], fwhm[i] = min(468, max(440, 452+2*rng.NormFloat64())), min(24, max(16, 19+0.4*rng.NormFloat64()))
	}
	dominant, purity := make([]float64, colourDies), make([]float64, colourDies)
	table, err := colour.NewDominantTable(colour.WhiteE)
	if err != nil {
		return err
	}
	err = b.ratePerCore("x, y to dominant wavelength and purity, a core", func() { table.Wavelengths(dominant, purity, x, y) }, 20)
	worst := 0.0
	for i := 0; i < colourDies; i += 997 {
		d, derr := colour.DominantOf(colour.XY{X: x[i], Y: y[i]}, colour.WhiteE)
		worst, err = max(worst, math.Abs(d.WavelengthNM-dominant[i])), errors.Join(err, derr)
	}
	if err != nil {
		return err
	}
	b.under("  off the direct computation by at most", worst, "nm", 0.005)
	line := colour.DefaultLineModel(452)
	peaks, err := colour.NewPeakTable(line, colour.WhiteE, 440, 470, 15, 25)
	if err != nil {
		return err
	}
	err = b.ratePerCore("peak and width to dominant wavelength, a core", func() { peaks.Dominant(dominant, peak, fwhm) }, 20)
	worst = 0
	for i := 0; i < colourDies; i += 9973 {
		d, derr := line.Dominant(peak[i], fwhm[i], colour.WhiteE)
		worst, err = max(worst, math.Abs(d-dominant[i])), errors.Join(err, derr)
	}
	b.under("  off the direct computation by at most", worst, "nm", 0.005)
	return err
}

// ratePerCore times work on all dies and wants so many million a second.
func (b *bench) ratePerCore(name string, work func(), goal float64) error {
	took, err := best(15, func() (time.Duration, error) {
		start := time.Now()
		work()
		return time.Since(start), nil
	})
	b.over(name, colourDies/took.Seconds()/1e6, "million/s", goal)
	return err
}

// measurePolygons bins dies into 200 chromaticity polygons on two cores.
func (b *bench) measurePolygons(ctx context.Context) error {
	spec, err := binning.Parse([]byte(polygonSpec()))
	if err != nil {
		return err
	}
	const wafers, dies = 100, 50_000
	rng := rand.New(rand.NewPCG(3, 2))
	var planes []wafermap.Plane
	for range 4 { // some wafers, binned again and again
		kx, ky := make([]int32, dies), make([]int32, dies)
		for i := range kx {
			kx[i] = int32(math.Round((0.385 + 0.1*(float64(i%224)/224-0.5) + 0.01*rng.NormFloat64()) * 1e5))
			ky[i] = int32(math.Round((0.385 + 0.1*(float64(i/224)/224-0.5) + 0.01*rng.NormFloat64()) * 1e5))
		}
		planes = append(planes, wafermap.PackScaled("cie_x", -5, kx), wafermap.PackScaled("cie_y", -5, ky))
	}
	took, err := best(10, func() (time.Duration, error) {
		start := time.Now()
		group, _ := errgroup.WithContext(ctx)
		for core := range 2 {
			group.Go(func() error {
				binner, codes, counts := spec.NewBinner(), make([]uint16, dies), make([]int, len(spec.Cells()))
				for w := core; w < wafers; w += 2 {
					pair := planes[w%4*2 : w%4*2+2]
					if err := binner.Bin(codes, counts, binning.PickPlanes(spec, pair), nil); err != nil {
						return err
					}
				}
				return nil
			})
		}
		err := group.Wait()
		return time.Since(start), err
	})
	b.over("dies into 200 chromaticity polygons, 2 cores", wafers*dies/took.Seconds()/1e6, "million/s", 30)
	return err
}

// polygonSpec is 20 × 10 leaning quadrangles.
func polygonSpec() string {
	var s strings.Builder
	s.WriteString("specification: two-hundred\nkind: probe\nregions:\n  - region: C\n    cells:\n")
	at := func(i, j int) string {
		return fmt.Sprintf("[%.3f, %.3f]", 0.3+0.01*float64(i)+0.002*float64(j), 0.3+0.008*float64(j)+0.001*float64(i))
	}
	for j := range 10 {
		for i := range 20 {
			fmt.Fprintf(&s, "      - {name: c%02d%02d, polygon: [%s, %s, %s, %s]}\n", j, i, at(i, j), at(i+1, j), at(i+1, j+1), at(i, j+1))
		}
	}
	return s.String()
}

// measureMoving moves an edge on the Bins page in a real browser, with all wafers
// of the fixture selected, and takes the time from the pointer's move to the new
// tallies on screen.
func (b *bench) measureMoving(ctx context.Context) error {
	pages, err := web.NewPages(nil)
	if err != nil {
		return err
	}
	handler, err := api.New(api.Config{Store: b.store, Pages: pages, Logger: slog.New(slog.DiscardHandler), Now: time.Now, Zone: time.UTC})
	if err != nil {
		return err
	}
	server := httptest.NewServer(handler)
	defer server.Close()
	ctx, stop := openBrowser(ctx)
	defer stop()
	if err := chromedp.Do(ctx, chromedp.Navigate(server.URL+"/bins/bench-bins?last="+fmt.Sprint(b.fixture.wafers)), chromedp.WaitVisible(chromedp.CSS("svg.binplot .handle"))); err != nil {
		return fmt.Errorf("open the specification's page: %w", err)
	}
	if _, err := chromedp.Run(ctx, chromedp.Evaluate[bool](takeEdge)); err != nil {
		return fmt.Errorf("take an edge: %w", err)
	}
	var times []float64
	for i := range 25 {
		ms, err := chromedp.Run(ctx, chromedp.Evaluate[float64](fmt.Sprintf(moveEdge, 3+i)))
		if err != nil {
			return fmt.Errorf("move an edge: %w", err)
		}
		if ms > 0 {
			times = append(times, ms)
		}
		time.Sleep(300 * time.Millisecond) // so that each move is answered before the next
	}
	if len(times) < 10 {
		return errors.New("the page does not say how long re-binning took")
	}
	sort.Float64s(times)
	b.under(fmt.Sprintf("an edge moved, %d dies re-binned, to screen (95 %%)", b.fixture.dies), times[len(times)*95/100], "ms", 150)
	return nil
}

// takeEdge presses the pointer on the second edge; moveEdge moves it and answers
// what the move before took.
const (
	takeEdge = `(() => {
		const handle = document.querySelectorAll('svg.binplot .handle')[1];
		const box = handle.getBoundingClientRect();
		window.benchAt = { x: box.x + box.width / 2, y: box.y + box.height / 2 };
		handle.dispatchEvent(new PointerEvent('pointerdown', { bubbles: true, clientX: benchAt.x, clientY: benchAt.y, button: 0 }));
		return true;
	})()`
	moveEdge = `(() => {
		const form = document.getElementById('editor');
		const took = Number(form.dataset.binnedMs ?? 0);
		window.dispatchEvent(new PointerEvent('pointermove', { bubbles: true, clientX: benchAt.x + %d, clientY: benchAt.y }));
		return took;
	})()`
)
