package main

import (
	"context"
	"fmt"
	"sort"
	"strings"
	"time"

	"golang.org/x/sync/errgroup"

	"epitally/analytics/binning"
	"epitally/db"
)

// groupBy asks in SQL for the answer that Epitally gives: what is untested, then
// the reject rules in order, then what lies beyond an axis, then the bin by its
// name, with the highest edge of an axis closed; per wafer.
const groupBy = `SELECT wafer, CASE
	WHEN dominant_wavelength_nm IS NULL OR radiant_flux_mw IS NULL OR forward_voltage_v IS NULL THEN 'untested'
	WHEN forward_voltage_v > 4.5 THEN 'open' WHEN forward_voltage_v < 2.0 THEN 'short' WHEN radiant_flux_mw < 60 THEN 'dim'
	WHEN dominant_wavelength_nm < 450 THEN 'short of the window' WHEN dominant_wavelength_nm > 460 THEN 'long of the window'
	WHEN radiant_flux_mw < 60 THEN 'too dim' WHEN radiant_flux_mw > 140 THEN 'too bright'
	WHEN forward_voltage_v < 2.8 THEN 'low voltage' WHEN forward_voltage_v > 3.6 THEN 'high voltage'
	ELSE 'W' || least(4, width_bucket(dominant_wavelength_nm, ARRAY[450, 452.5, 455, 457.5, 460]::float8[]))
	  || 'F' || least(4, width_bucket(radiant_flux_mw, ARRAY[60, 80, 100, 120, 140]::float8[]))
	  || 'V' || least(4, width_bucket(forward_voltage_v, ARRAY[2.8, 3.0, 3.2, 3.4, 3.6]::float8[])) END AS bin, count(*) AS dies
FROM die_row GROUP BY wafer, bin`

// measureRebinning bins every die of every wafer on three quantities out of
// Postgres, by Epitally with two goroutines and by SQL on the row table, and
// holds the two answers to be the same.
func (b *bench) measureRebinning(ctx context.Context) error {
	if _, err := b.psql(ctx, "VACUUM ANALYZE die_row"); err != nil {
		return err
	}
	if _, err := b.psql(ctx, "CREATE TABLE by_sql AS "+groupBy); err != nil { // warms the cache too
		return err
	}
	page, err := b.store.Wafers(ctx, db.WaferFilter{Limit: 500, Search: "B-"})
	if err != nil {
		return err
	}
	var ids []int64
	for _, row := range page.Rows {
		ids = append(ids, row.Measurement.ID)
		if err := b.sameAnswer(ctx, row); err != nil {
			return err
		}
	}
	spec, err := binning.Parse([]byte(specYAML))
	if err != nil {
		return err
	}
	dies := 0
	ours, err := best(120, func() (time.Duration, error) {
		start := time.Now()
		n, err := b.rebin(ctx, spec, ids)
		dies = n
		return time.Since(start), err
	})
	if err != nil {
		return err
	}
	if dies != b.fixture.dies {
		return fmt.Errorf("re-binned %d dies of %d", dies, b.fixture.dies)
	}
	sql, err := best(5, func() (time.Duration, error) { return b.psql(ctx, "CREATE TEMP TABLE result AS "+groupBy) })
	if err != nil {
		return err
	}
	b.atLeast("re-bin them on three quantities, against GROUP BY", ours.Seconds()*1e3, sql.Seconds()*1e3, "ms", sql.Seconds()/ours.Seconds(), 60)
	b.over("dies re-binned out of Postgres on 2 cores", float64(dies)/ours.Seconds()/1e6, "million/s", 60)
	return nil
}

// sameAnswer compares a wafer's tally, made when it was loaded, with SQL's.
func (b *bench) sameAnswer(ctx context.Context, row db.WaferRow) error {
	if row.Tally == nil {
		return fmt.Errorf("wafer %s has no tally", row.Wafer.Name)
	}
	var ours strings.Builder
	for _, c := range row.Tally.Cells {
		if c.Dies > 0 {
			fmt.Fprintf(&ours, "%s|%d\n", c.Name, c.Dies)
		}
	}
	out, err := b.rows(ctx, fmt.Sprintf("SELECT bin, dies FROM by_sql WHERE wafer = '%s'", row.Wafer.Name))
	if err != nil {
		return err
	}
	if a, b := sorted(ours.String()), sorted(out); a != b {
		return fmt.Errorf("wafer %s: Epitally bins\n%s\nSQL bins\n%s", row.Wafer.Name, a, b)
	}
	return nil
}

func sorted(lines string) string {
	list := strings.Split(strings.TrimSpace(lines), "\n")
	sort.Strings(list)
	return strings.Join(list, "\n")
}

// rebin takes half of the wafers on each of two goroutines.
func (b *bench) rebin(ctx context.Context, spec *binning.Spec, ids []int64) (int, error) {
	group, ctx := errgroup.WithContext(ctx)
	halves := [2]int{}
	for h := range halves {
		part := ids[h*len(ids)/2 : (h+1)*len(ids)/2]
		group.Go(func() (err error) {
			halves[h], err = b.rebinPart(ctx, spec, part)
			return err
		})
	}
	err := group.Wait()
	return halves[0] + halves[1], err
}

// best is the shortest of n runs: what the machine can do when nothing else
// disturbs it, for us and for the peer alike.
func best(n int, run func() (time.Duration, error)) (time.Duration, error) {
	times := make([]time.Duration, n)
	for i := range times {
		t, err := run()
		if err != nil {
			return 0, err
		}
		times[i] = t
	}
	sort.Slice(times, func(i, j int) bool { return times[i] < times[j] })
	return times[0], nil
}

// rebinPart works on the planes as they lie in the database, without putting
// their bytes together first.
func (b *bench) rebinPart(ctx context.Context, spec *binning.Spec, ids []int64) (dies int, err error) {
	binner := spec.NewBinner()
	counts := make([]int, len(spec.Cells()))
	lanes := make([]binning.Lanes, len(spec.Quantities()))
	err = b.store.EachStoredPlanes(ctx, ids, spec.Quantities(), func(_ int64, planes []db.StoredPlane) error {
		for i := range planes {
			lane, err := planes[i].Lanes()
			if err != nil {
				return err
			}
			lanes[i] = lane
		}
		if err := binner.BinLanes(nil, counts, lanes, nil); err != nil {
			return err
		}
		for _, n := range counts {
			dies += n
		}
		return nil
	})
	return dies, err
}
