package main

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"strconv"
	"time"

	"github.com/chromedp/chromedp"

	"epitally/api"
	"epitally/web"
)

// measureLargeMap loads one wafer of a million dies, takes the server's time
// from Postgres to bytes out for its plane, and the browser's for drawing it.
func (b *bench) measureLargeMap(ctx context.Context) error {
	if _, _, err := b.load(ctx, b.fixture.million); err != nil {
		return err
	}
	pages, err := web.NewPages(nil)
	if err != nil {
		return err
	}
	handler, err := api.New(api.Config{Store: b.store, Pages: pages, Logger: slog.New(slog.DiscardHandler), Now: time.Now, Zone: time.UTC})
	if err != nil {
		return err
	}
	w, err := b.store.Wafer(ctx, "B-MILLION")
	if err != nil {
		return err
	}
	measurements, err := b.store.Measurements(ctx, w.ID)
	if err != nil || len(measurements) == 0 {
		return fmt.Errorf("the large wafer has no measurement: %v", err)
	}
	path := fmt.Sprintf("/api/v1/measurements/%d/planes/dominant_wavelength_nm", measurements[0].ID)
	took, err := best(15, func() (time.Duration, error) {
		request := httptest.NewRequestWithContext(ctx, http.MethodGet, path, nil)
		request.Header.Set("Accept", "application/vnd.epitally.plane")
		request.Header.Set("Accept-Encoding", "gzip, deflate, br, zstd") // as the browser asks
		out := &discard{header: http.Header{}}
		start := time.Now()
		handler.ServeHTTP(out, request)
		if out.status != http.StatusOK || out.n == 0 {
			return 0, fmt.Errorf("%s: status %d, %d bytes", path, out.status, out.n)
		}
		return time.Since(start), nil
	})
	if err != nil {
		return err
	}
	b.under(fmt.Sprintf("plane of a wafer of %d dies, from Postgres to bytes out", measurements[0].Dies), took.Seconds()*1e3, "ms", 20)
	server := httptest.NewServer(handler)
	defer server.Close()
	drawn, err := drawnMS(ctx, server.URL+"/wafers/B-MILLION?quantity=dominant_wavelength_nm")
	if err != nil {
		return err
	}
	b.under("its map drawn in the browser (decode, shade, paint)", drawn, "ms", 400)
	return nil
}

// discard is an answer that is counted and thrown away.
type discard struct {
	header http.Header
	status int
	n      int
}

func (d *discard) Header() http.Header { return d.header }
func (d *discard) WriteHeader(s int)   { d.status = s }
func (d *discard) Write(p []byte) (int, error) {
	if d.status == 0 {
		d.status = http.StatusOK
	}
	d.n += len(p)
	return io.Discard.Write(p)
}

// openBrowser starts a headless Chromium for a minute at most.
func openBrowser(ctx context.Context) (context.Context, func()) {
	options := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.NoSandbox, chromedp.DisableGPU,
		chromedp.Flag("disable-quic", true), chromedp.WindowSize(1280, 900))
	ctx, stopAllocator := chromedp.NewExecAllocator(ctx, options...)
	ctx, stopBrowser := chromedp.NewContext(ctx)
	ctx, stopTime := context.WithTimeout(ctx, time.Minute)
	return ctx, func() { stopTime(); stopBrowser(); stopAllocator() }
}

// drawnMS opens a wafer page in a real headless Chromium and reads what the
// page itself measured.
func drawnMS(ctx context.Context, url string) (float64, error) {
	ctx, stop := openBrowser(ctx)
	defer stop()
	drawn := chromedp.CSS("#map-canvas[data-drawn-ms]")
	if err := chromedp.Do(ctx, chromedp.Navigate(url), chromedp.WaitVisible(drawn)); err != nil {
		return 0, fmt.Errorf("open %s: %w", url, err)
	}
	attribute, err := chromedp.Run(ctx, chromedp.AttributeValue(drawn, "data-drawn-ms"))
	if err != nil {
		return 0, fmt.Errorf("open %s: %w", url, err)
	}
	return strconv.ParseFloat(attribute.Value, 64)
}
