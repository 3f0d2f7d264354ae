package jobs

import (
	"context"
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"

	"epitally/db/dbtest"
)

// BenchmarkLoadCSV loads one file of ten wafers of fifty thousand dies, five
// quantities each, into planes, summaries and small maps.
func BenchmarkLoadCSV(b *testing.B) {
	store := dbtest.New(b)
	loader := NewLoader((&testBundle{store: store}).loaderConfig())
	const wafers, side = 10, 224
	text := manyWafers(wafers, side)
	b.SetBytes(int64(len(text)))
	b.ReportAllocs()
	n := 0
	for b.Loop() {
		n++
		// A remark of its own makes the bytes new.
		in := strings.NewReader(text + fmt.Sprintf("# note: %d\n# wafer: E\nx,y,fwhm_nm\n0,0,1\n", n))
		if _, err := loader.Load(context.Background(), Incoming{Name: "bench.csv", R: in}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(n*wafers*side*side)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}

func manyWafers(wafers, side int) string {
	text := []byte("# epitally: die readings\n# kind: probe\n# measured at: 2026-11-05T06:00:00Z\nwafer,x,y,dominant_wavelength_nm,fwhm_nm,radiant_flux_mw,forward_voltage_v,reverse_current_ua\n")
	rng := rand.New(rand.NewPCG(5, 6))
	for w := range wafers {
		for y := range side {
			for x := range side {
				text = fmt.Appendf(text, "B-%02d,%d,%d", w, x-side/2, y-side/2)
				for _, q := range [][3]float64{{455, 1, 2}, {19, 0.2, 2}, {98, 4, 2}, {3.15, 0.03, 3}, {0.03, 0.005, 3}} {
					text = strconv.AppendFloat(append(text, ','), q[0]+q[1]*rng.NormFloat64(), 'f', int(q[2]), 64)
				}
				text = append(text, '\n')
			}
		}
	}
	return string(text)
}
