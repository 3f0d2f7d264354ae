package reader

import (
	"bytes"
	"context"
	"fmt"
	"math/rand/v2"
	"strconv"
	"testing"
)

// benchText is n wafers of about 50,000 dies with five quantities, the shape and
// the number of digits that mappers and probers write.
func benchText(wafers, side int) []byte {
	rng := rand.New(rand.NewPCG(1, 2))
	b := []byte("# epitally: die readings\n# kind: probe\n# lot: L1\n# station: P1\n# measured at: 2026-11-05T06:00:00Z\n" +
		"wafer,x,y,dominant_wavelength_nm,fwhm_nm,radiant_flux_mw,forward_voltage_v,reverse_current_ua\n")
	decimal := func(v float64, places int) { b = strconv.AppendFloat(append(b, ','), v, 'f', places, 64) }
	for w := range wafers {
		for y := -side / 2; y < side/2; y++ {
			for x := -side / 2; x < side/2; x++ {
				b = fmt.Appendf(b, "B-%04d,%d,%d", w, x, y)
				decimal(455+rng.NormFloat64(), 2)
				decimal(18+rng.NormFloat64(), 1)
				decimal(1000+100*rng.NormFloat64(), 1)
				decimal(3.1+0.1*rng.NormFloat64(), 3)
				decimal(0.01*rng.ExpFloat64(), 3)
				b = append(b, '\n')
			}
		}
	}
	return b
}

// BenchmarkReadCSV reads ten wafers of 49,284 dies from memory: hash, parse,
// order and pack.
func BenchmarkReadCSV(b *testing.B) {
	text := benchText(10, 222)
	b.SetBytes(int64(len(text)))
	b.ReportAllocs()
	dies := int64(0)
	for b.Loop() {
		res, err := Read(context.Background(), Input{Name: "bench.csv", R: bytes.NewReader(text)}, Sink{})
		if err != nil {
			b.Fatal(err)
		}
		dies += res.Dies
	}
	b.ReportMetric(float64(dies)/b.Elapsed().Seconds(), "dies/s")
}
