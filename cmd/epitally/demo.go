package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"github.com/schollz/progressbar/v3"

	"epitally/analytics/simfab"
	"epitally/db"
)

// demo grows an invented fab, writes it as files into the drop folder, loads
// them as a scan does, and serves the pages.
func demo(ctx context.Context, c *console, args []string) error {
	config := defaultConfig()
	config.Data, config.SettleSeconds, config.LogLevel, config.Zone = filepath.Join(os.TempDir(), "epitally-demo"), 0, "warn", "Asia/Taipei"
	flags := flagsFor("demo", &config)
	seed := flags.Uint64("seed", 1, "`number` the fab is grown from; the same seed gives the same files")
	wafers := flags.Int("wafers", 300, "how many wafers to grow")
	filesOnly := flags.Bool("files-only", false, "write the files to --out and load nothing")
	out := flags.String("out", "", "`folder` for --files-only")
	if err := config.resolve(flags, args, os.Getenv); err != nil {
		return err
	}
	if *wafers < 1 || *wafers > 100_000 {
		return fmt.Errorf("demo: --wafers %d is not between 1 and 100000", *wafers)
	}
	if *filesOnly != (*out != "") {
		return fmt.Errorf("demo: --files-only and --out DIR go together")
	}
	fab := simfab.New(simfab.Config{Seed: *seed, Wafers: *wafers})
	if *filesOnly {
		return growFiles(ctx, c, fab, *out)
	}
	app, err := New(ctx, config, newLogger(c.err, config.LogLevel))
	if err != nil {
		return err
	}
	defer app.Close()
	if err := fillDemo(ctx, c, app, fab, config); err != nil {
		return err
	}
	fmt.Fprintf(c.out, "\nThe demo fab is ready. Open %s/wafers\nStop it with Ctrl-C; its data stays in %s.\n", app.URL(), config.Data)
	return app.Run(ctx)
}

func growFiles(ctx context.Context, c *console, fab *simfab.Fab, dir string) error {
	start := time.Now()
	bar := newCountBar(c, "growing wafers")
	err := writeFab(ctx, fab, dir, func(done, total int) { setBar(bar, done, total) })
	if err != nil {
		return err
	}
	bar.Finish()
	fmt.Fprintf(c.out, "The files are in %s, and what they were grown from in %s (%.1f s).\n", dir, filepath.Join(dir, truthFile), time.Since(start).Seconds())
	return nil
}

// fillDemo does nothing when the data folder holds this very fab already: its
// files lie in loaded/ and the database knows them by their bytes.
func fillDemo(ctx context.Context, c *console, app *App, fab *simfab.Fab, config Config) error {
	page, err := app.Store.Wafers(ctx, db.WaferFilter{Limit: 1})
	if err != nil {
		return err
	}
	if page.Total > 0 {
		fmt.Fprintf(c.out, "%s holds %d wafers already; remove the folder to grow the fab anew.\n", config.Data, page.Total)
		return nil
	}
	if err := growFiles(ctx, c, fab, config.Drop); err != nil {
		return err
	}
	bar := newCountBar(c, "loading files")
	done, refused := 0, 0
	app.Scanner.Done = func(src db.Source, err error, total int) {
		done++
		if err != nil {
			refused++
			bar.Clear()
			fmt.Fprintln(c.err, err)
		}
		setBar(bar, done, total)
	}
	defer func() { app.Scanner.Done = nil }()
	result, err := app.Scanner.Scan(ctx)
	if err != nil {
		return err
	}
	bar.Finish()
	fmt.Fprintf(c.out, "Loaded %d files, %.1f million dies in %.1f s; %d refused.\n", result.Stored, float64(result.Dies)/1e6, result.Took.Seconds(), refused)
	return nil
}

func newCountBar(c *console, what string) *progressbar.ProgressBar {
	return progressbar.NewOptions(1, progressbar.OptionSetWriter(c.err), progressbar.OptionSetDescription(what),
		progressbar.OptionShowCount(), progressbar.OptionSetWidth(30), progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionClearOnFinish())
}

func setBar(bar *progressbar.ProgressBar, done, total int) {
	bar.ChangeMax(total)
	bar.Set(done)
}
