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
	copied, err := b.psql(ctx, fmt.Sprintf(`\copy die_row FROM '%s' WITH (FORMAT csv, HEADER true)`, b.fixture.plain))
	if err != nil {
		return err
	}
	indexed, err := b.psql(ctx, "CREATE INDEX die_row_wafer ON die_row (wafer)")
	if err != nil {
		return err
	}
	if _, err := b.psql(ctx, "CHECKPOINT"); err != nil {
		return err
	}
	say("epitally load of the same %d dies", b.fixture.dies)
	took, memory, err := b.load(ctx, b.fixture.own)
	if err != nil {
		return err
	}
	peer := copied.Seconds() + indexed.Seconds()
	b.atLeast(fmt.Sprintf("load a CSV of %d dies, durable, against \\copy", b.fixture.dies), took.Seconds(), peer, "s", peer/took.Seconds(), 5)
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
