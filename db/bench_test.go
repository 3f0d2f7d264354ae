package db_test

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"golang.org/x/sync/errgroup"

	"epitally/analytics/binning"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/db/dbtest"
)

const benchSpec = `specification: bench
kind: probe
rejects:
  - {reason: open, when: forward_voltage_v > 4.5}
  - {reason: dim, when: radiant_flux_mw < 60}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 452.5, 455, 457.5, 460]}
  - {axis: F, quantity: radiant_flux_mw, edges: [60, 80, 100, 120, 140]}
  - {axis: V, quantity: forward_voltage_v, edges: [2.8, 3.0, 3.2, 3.4, 3.6]}
`

// benchWafers stores wafers of three noisy quantities.
func benchWafers(b *testing.B, s *db.Store, wafers, side int) []int64 {
	b.Helper()
	g := square(side)
	rng := rand.New(rand.NewPCG(1, 2))
	l, err := s.BeginLoad(ctx)
	if err != nil {
		b.Fatal(err)
	}
	var ids []int64
	for w := range wafers {
		m := &db.NewMeasurement{Wafer: fmt.Sprintf("B-%d", w), Kind: "probe", MeasuredAt: noon, Grid: g}
		for _, q := range []struct {
			name           string
			exponent       int
			middle, spread float64
		}{{"dominant_wavelength_nm", -2, 45500, 120}, {"radiant_flux_mw", -2, 10000, 400}, {"forward_voltage_v", -3, 3150, 30}} {
			k := make([]int32, g.Len())
			for i := range k {
				k[i] = int32(q.middle + q.spread*rng.NormFloat64())
			}
			known, _ := quantity.Lookup(q.name)
			m.Planes, m.Quantities = append(m.Planes, wafermap.PackScaled(q.name, q.exponent, k)), append(m.Quantities, known)
		}
		id, err := l.PutMeasurement(ctx, m)
		if err != nil {
			b.Fatal(err)
		}
		ids = append(ids, id)
	}
	if _, err := l.Commit(ctx, source("bench", 1)); err != nil {
		b.Fatal(err)
	}
	return ids
}

// BenchmarkEachStoredPlanes reads three quantities of forty wafers of fifty
// thousand dies on two goroutines, without and with binning them.
func BenchmarkEachStoredPlanes(b *testing.B) {
	s := dbtest.New(b)
	ids := benchWafers(b, s, 40, 224)
	spec, err := binning.Parse([]byte(benchSpec))
	if err != nil {
		b.Fatal(err)
	}
	for _, c := range []struct {
		name string
		bin  bool
	}{{"read", false}, {"read and bin", true}} {
		b.Run(c.name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				var group errgroup.Group
				for h := range 2 {
					part := ids[h*len(ids)/2 : (h+1)*len(ids)/2]
					group.Go(func() error { return readAndBin(s, spec, part, c.bin) })
				}
				if err := group.Wait(); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.N*len(ids)*224*224)/b.Elapsed().Seconds()/1e6, "Mdies/s")
		})
	}
}

func readAndBin(s *db.Store, spec *binning.Spec, ids []int64, bin bool) error {
	binner, counts := spec.NewBinner(), make([]int, len(spec.Cells()))
	lanes := make([]binning.Lanes, len(spec.Quantities()))
	return s.EachStoredPlanes(ctx, ids, spec.Quantities(), func(_ int64, planes []db.StoredPlane) error {
		if !bin {
			return nil
		}
		for i := range planes {
			lane, err := planes[i].Lanes()
			if err != nil {
				return err
			}
			lanes[i] = lane
		}
		return binner.BinLanes(nil, counts, lanes, nil)
	})
}
