package main

import (
	"context"
	"fmt"
	"os/exec"
	"strconv"
	"strings"
)

// measureDisk divides everything the database holds for the wafers (planes,
// grids, summaries, tallies, small maps, their indexes and TOAST) by the values.
func (b *bench) measureDisk(ctx context.Context) error {
	if _, err := b.psql(ctx, "VACUUM ANALYZE"); err != nil {
		return err
	}
	ours, err := b.sizeOf(ctx, `SELECT sum(pg_total_relation_size(c.oid)) FROM pg_class c JOIN pg_namespace n ON n.oid = c.relnamespace
		WHERE c.relkind IN ('r', 'm') AND n.nspname NOT IN ('pg_catalog', 'information_schema', 'pg_toast') AND c.relname NOT IN ('die_row', 'by_sql')`)
	if err != nil {
		return err
	}
	rows, err := b.sizeOf(ctx, "SELECT pg_total_relation_size('die_row')")
	if err != nil {
		return err
	}
	values := float64(b.fixture.dies * len(b.fixture.quantities))
	b.under("disk per die value, all overhead counted", ours/values, "bytes", 1.5)
	b.figures[len(b.figures)-1].Peer, b.figures[len(b.figures)-1].Ratio = rows/values, rows/ours
	return nil
}

func (b *bench) sizeOf(ctx context.Context, sql string) (float64, error) {
	out, err := b.rows(ctx, sql)
	if err != nil {
		return 0, err
	}
	return strconv.ParseFloat(strings.TrimSpace(out), 64)
}

// rows gives what a query answers, fields parted by |.
func (b *bench) rows(ctx context.Context, sql string) (string, error) {
	out, err := exec.CommandContext(ctx, "psql", "--no-psqlrc", "--tuples-only", "--no-align", b.url, "--command", sql).Output()
	if err != nil {
		return "", fmt.Errorf("psql: %w", err)
	}
	return string(out), nil
}
