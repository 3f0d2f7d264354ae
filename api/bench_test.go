package api

import (
	"fmt"
	"net/http"
	"testing"

	"epitally/analytics/wafermap"
)

// square is a grid of side × side dies around (0, 0).
func square(side int) *wafermap.Grid {
	g := &wafermap.Grid{}
	for y := -side / 2; y < side-side/2; y++ {
		for x := -side / 2; x < side-side/2; x++ {
			g.X, g.Y = append(g.X, int16(x)), append(g.Y, int16(y))
		}
	}
	return g
}

// discard counts the bytes of an answer.
type discard struct {
	header http.Header
	status int
	n      int64
}

func (d *discard) Header() http.Header    { return d.header }
func (d *discard) WriteHeader(status int) { d.status = status }
func (d *discard) Write(b []byte) (int, error) {
	d.n += int64(len(b))
	return len(b), nil
}

// million is a server with a wafer of a million dies.
func million(b *testing.B) (f *fixture, root string) {
	b.Helper()
	f = setup(b)
	l := wafermap.Layout{Name: "six-inch", WaferDiameterMM: 150, DiePitchXMM: 0.1, DiePitchYMM: 0.1, EdgeExclusionMM: 2, Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "up"}
	id := f.put(b, probeOf(b, "M-1", noon, square(1000), l))
	return f, fmt.Sprintf("/api/v1/measurements/%d", id)
}

// benchmarkGet measures server time from the request to the last byte out.
func benchmarkGet(b *testing.B, h http.Handler, target string, header ...string) {
	b.Helper()
	b.ReportAllocs()
	var sent int64
	for b.Loop() {
		w := &discard{header: http.Header{}}
		h.ServeHTTP(w, request("GET", target, "", header...))
		if w.status != http.StatusOK {
			b.Fatalf("%s: %d", target, w.status)
		}
		sent = w.n
	}
	b.ReportMetric(float64(sent), "B-sent/op")
}

func BenchmarkPlane1M(b *testing.B) {
	f, root := million(b)
	for _, coding := range []string{"identity", "zstd", "gzip"} {
		b.Run(coding, func(b *testing.B) { benchmarkGet(b, f, root+"/planes/"+dominant, "Accept-Encoding", coding) })
	}
}

func BenchmarkBins1M(b *testing.B) {
	f, root := million(b)
	benchmarkGet(b, f, root+"/bins?specification=harbour-blue", "Accept-Encoding", "zstd")
}

func BenchmarkMapPNG1M(b *testing.B) {
	f, root := million(b)
	benchmarkGet(b, f, root+"/map.png?size=1024&quantity="+dominant)
}

func BenchmarkWafersList(b *testing.B) {
	f := setup(b)
	for i := range 60 {
		f.put(b, probeOf(b, fmt.Sprintf("B-%02d", i), noon, f.grid, f.layout))
	}
	benchmarkGet(b, f, "/api/v1/wafers?limit=50", "Accept-Encoding", "zstd")
}
