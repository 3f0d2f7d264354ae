package reader

import (
	"bytes"
	"context"
	"encoding/binary"
	"math/rand/v2"
	"testing"
)

// BenchmarkReadSTDF reads two wafers of 10,000 dies with 40 tests, four sites at
// a time, in the order and the lengths that testers write.
func BenchmarkReadSTDF(b *testing.B) {
	const sites, tests, side = 4, 40, 100
	rng := rand.New(rand.NewPCG(1, 2))
	w := newSTDFText(binary.LittleEndian).mir(noon, "L", "P", "N")
	for _, id := range []string{"W-1", "W-2"} {
		w.wir(1, noon, id)
		for die := 0; die < side*side; die += sites {
			for s := range uint8(sites) {
				w.pir(1, s)
			}
			for k := range uint32(tests) {
				for s := range uint8(sites) {
					more := []any{"VF_LED at some mA", ""}
					if die == 0 && s == 0 {
						more = defaults("VF_LED at some mA", "V")
					}
					w.ptr(1000+k, 1, s, float32(rng.NormFloat64()), more...)
				}
			}
			for s := range sites {
				w.prr(1, uint8(s), 0, 1, 1, int16((die+s)%side), int16(die/side), 20)
			}
		}
		w.wrr(1, side*side, id)
	}
	w.mrr()
	b.SetBytes(int64(len(w.b)))
	b.ReportAllocs()
	dies := int64(0)
	for b.Loop() {
		res, err := Read(context.Background(), Input{Name: "bench.stdf", R: bytes.NewReader(w.b)}, Sink{})
		if err != nil {
			b.Fatal(err)
		}
		dies += res.Dies
	}
	b.ReportMetric(float64(dies)/b.Elapsed().Seconds(), "dies/s")
}
