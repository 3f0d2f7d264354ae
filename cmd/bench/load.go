package main

import (
	"context"
	"fmt"
	"os/exec"
	"syscall"
	"time"

	"epitally/db"
)

// measureLoad loads the same text twice: by Epitally into planes, summaries and
// tallies, and by psql \copy into a row per die with an index on wafer.
func (b *bench) measureLoad(ctx context.Context) error {
	for _, document := range []string{b.fixture.catalogue, b.fixture.spec, b.fixture.runSheet} {
		if _, _, err := b.load(ctx, document); err != nil {
			return err
		}
	}
	say("psql \\copy of %d dies into rows, and the index", b.fixture.dies)
	if _, err := b.psql(ctx, `CREATE TABLE die_row (wafer text NOT NULL, x smallint NOT NULL, y smallint NOT NULL,
		dominant_wavelength_nm double precision, fwhm_nm double precision, radiant_flux_mw double precision,
		forward_voltage_v double precision, reverse_current_ua double precision)`); err != nil {
		return err
	}
	copyRows := fmt.Sprintf(`\copy die_row FROM '%s' WITH (FORMAT csv, HEADER true)`, b.fixture.plain)
	peer, err := best(3, func() (time.Duration, error) {
		if _, err := b.psql(ctx, "DROP INDEX IF EXISTS die_row_wafer; TRUNCATE die_row; CHECKPOINT"); err != nil {
			return 0, err
		}
		copied, err := b.psql(ctx, copyRows)
		if err != nil {
			return 0, err
		}
		indexed, err := b.psql(ctx, "CREATE INDEX die_row_wafer ON die_row (wafer)")
		return copied + indexed, err
	})
	if err != nil {
		return err
	}
	say("epitally load of the same %d dies", b.fixture.dies)
	memory := 0.0
	took, err := best(3, func() (time.Duration, error) {
		if _, err := b.psql(ctx, "TRUNCATE measurement, measurement_key, plane, summary, small_map, tally; DELETE FROM source WHERE dies > 0; CHECKPOINT"); err != nil {
			return 0, err
		}
		took, mb, err := b.load(ctx, b.fixture.own)
		memory = max(memory, mb)
		return took, err
	})
	if err != nil {
		return err
	}
	b.atLeast(fmt.Sprintf("load a CSV of %d dies, durable, against \\copy", b.fixture.dies), took.Seconds(), peer.Seconds(), "s", peer.Seconds()/took.Seconds(), 5)
	b.under("memory while loading it", memory, "MB", 200)
	b.store, err = db.Open(ctx, db.Config{URL: b.url, MaxConns: 8})
	return err
}

// load runs the built command, as a person would, and gives its wall time and
// its largest resident memory in MB.
func (b *bench) load(ctx context.Context, path string) (time.Duration, float64, error) {
	bin, err := binary()
	if err != nil {
		return 0, 0, err
	}
	cmd := exec.CommandContext(ctx, bin, "load", "--database-url", b.url, path)
	start := time.Now()
	out, err := cmd.CombinedOutput()
	if err != nil {
		return 0, 0, fmt.Errorf("epitally load %s: %w: %s", path, err, out)
	}
	took := time.Since(start)
	usage := cmd.ProcessState.SysUsage().(*syscall.Rusage)
	return took, float64(usage.Maxrss) / 1000, nil
}
