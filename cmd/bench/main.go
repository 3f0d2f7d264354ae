// Command bench measures the hot paths of Epitally against their goals and
// against PostgreSQL itself, in one run on one machine, and prints a table.
// BENCH_JSON=file also writes it as JSON; BENCH_WAFERS=n shortens the run while
// working on it (goals are for the default of 100 wafers).
package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"epitally/db"
	"epitally/db/localpg"
)

// figure is one line of the table. Peer and Ratio are zero where the goal is a
// limit and not a comparison.
type figure struct {
	Name  string  `json:"name"`
	Value float64 `json:"value"`
	Unit  string  `json:"unit"`
	Peer  float64 `json:"peer"`  // the same work done by the peer, in Unit
	Ratio float64 `json:"ratio"` // how many times better than the peer
	Goal  string  `json:"goal"`
	Met   bool    `json:"met"`
}

// bench is what the measurements share.
type bench struct {
	dir     string
	url     string
	store   *db.Store
	fixture *fixture
	figures []figure
}

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	if err := run(ctx); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(ctx context.Context) (err error) {
	dir, err := os.MkdirTemp("", "epitally-bench-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	if err := os.Chmod(dir, 0o755); err != nil { // the database's account must pass
		return err
	}
	b := &bench{dir: dir}
	say("a private PostgreSQL, with the settings and the durability of a real one")
	cluster, err := localpg.Start(ctx, localpg.Options{DataDir: filepath.Join(dir, "postgres"), Logger: slog.New(slog.DiscardHandler)})
	if err != nil {
		return err
	}
	defer cluster.Stop(context.WithoutCancel(ctx))
	b.url = cluster.URL("epitally")
	wafers := 100
	if n, err := strconv.Atoi(os.Getenv("BENCH_WAFERS")); err == nil && n > 0 {
		wafers = n
	}
	say("writing %d wafers as CSV", wafers)
	if b.fixture, err = newFixture(dir, wafers); err != nil {
		return err
	}
	for _, step := range []func(context.Context) error{b.measureLoad, b.measureRebinning, b.measureDisk, b.measureMoving, b.measureLargeMap,
		b.measureColour, b.measurePolygons} {
		if err := step(ctx); err != nil {
			return err
		}
	}
	b.store.Close()
	if err := cluster.Stop(ctx); err != nil {
		return err
	}
	if err := b.measureServer(ctx); err != nil {
		return err
	}
	return b.report()
}

func say(format string, args ...any) { fmt.Fprintf(os.Stderr, "… "+format+"\n", args...) }

// atLeast adds a figure that is a ratio to a peer.
func (b *bench) atLeast(name string, value, peer float64, unit string, ratio, goal float64) {
	b.add(figure{name, value, unit, peer, ratio, fmt.Sprintf("at least %g×", goal), ratio >= goal})
}

// over and under add a figure with a limit.
func (b *bench) over(name string, value float64, unit string, goal float64) {
	b.add(figure{Name: name, Value: value, Unit: unit, Goal: fmt.Sprintf("over %g", goal), Met: value > goal})
}

func (b *bench) under(name string, value float64, unit string, goal float64) {
	b.add(figure{Name: name, Value: value, Unit: unit, Goal: fmt.Sprintf("at most %g", goal), Met: value <= goal})
}

func (b *bench) add(f figure) {
	b.figures = append(b.figures, f)
	say("%s: %.4g %s", f.Name, f.Value, f.Unit)
}

func (b *bench) report() error {
	fmt.Printf("\n%-58s %12s %-14s %12s %8s  %-14s %s\n", "figure", "value", "unit", "peer", "ratio", "goal", "met")
	missed := 0
	for _, f := range b.figures {
		peer, ratio := "", ""
		if f.Peer > 0 {
			peer, ratio = fmt.Sprintf("%.4g", f.Peer), fmt.Sprintf("%.1f×", f.Ratio)
		}
		met := "yes"
		if !f.Met {
			met = "NO"
			missed++
		}
		fmt.Printf("%-58s %12.4g %-14s %12s %8s  %-14s %s\n", f.Name, f.Value, f.Unit, peer, ratio, f.Goal, met)
	}
	if path := os.Getenv("BENCH_JSON"); path != "" {
		text, err := json.MarshalIndent(b.figures, "", " ")
		if err != nil {
			return err
		}
		if err := os.WriteFile(path, append(text, '\n'), 0o644); err != nil {
			return err
		}
	}
	if missed > 0 {
		return fmt.Errorf("%d goals were missed", missed)
	}
	return nil
}

// psql runs one command with the client that comes with the server and gives
// how long the command itself took.
func (b *bench) psql(ctx context.Context, sql string) (time.Duration, error) {
	cmd := exec.CommandContext(ctx, "psql", "--no-psqlrc", "--quiet", "--set=ON_ERROR_STOP=1", b.url, "--command", sql)
	start := time.Now()
	out, err := cmd.CombinedOutput()
	if err != nil {
		return 0, fmt.Errorf("psql: %w: %s", err, strings.TrimSpace(string(out)))
	}
	return time.Since(start), nil
}

// binary is the built command that the process figures are taken of.
func binary() (string, error) {
	path, err := filepath.Abs("bin/epitally")
	if err != nil {
		return "", err
	}
	if _, err := os.Stat(path); err != nil {
		return "", errors.New("bin/epitally is missing; run make build")
	}
	return path, nil
}
