package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"

	"epitally/api"
	"epitally/db"
	"epitally/db/localpg"
	"epitally/jobs"
	"epitally/web"
)

// App is the whole server: database, schedules, pages and API.
type App struct {
	config   Config
	log      *slog.Logger
	cluster  *localpg.Cluster // nil with an external database
	Store    *db.Store
	folder   *jobs.Folder
	Scanner  *jobs.Scanner
	schedule *jobs.Schedule
	server   *http.Server
	listener net.Listener
}

// New wires everything by hand and binds the address, but serves nothing yet.
// What was started before an error is stopped again.
func New(ctx context.Context, c Config, log *slog.Logger) (app *App, err error) {
	a := &App{config: c, log: log}
	defer func() {
		if err != nil {
			a.Close()
		}
	}()
	if a.listener, err = net.Listen("tcp", c.Listen); err != nil {
		return nil, fmt.Errorf("listen on %s: %w; choose another address with --listen", c.Listen, err)
	}
	if err := a.openStore(ctx); err != nil {
		return nil, err
	}
	zone, err := time.LoadLocation(c.Zone)
	if err != nil {
		return nil, err
	}
	if a.folder, err = jobs.OpenFolder(c.Drop, seconds(c.SettleSeconds), time.Now); err != nil {
		return nil, err
	}
	a.Scanner = jobs.NewScanner(a.folder, loaderConfig(c, a.Store, log, zone), c.Workers)
	metrics := prometheus.NewRegistry()
	metrics.MustRegister(collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	if a.Scanner.Metrics, err = jobs.NewMetrics(metrics); err != nil {
		return nil, err
	}
	a.schedule, err = jobs.NewSchedule(jobs.ScheduleConfig{Scanner: a.Scanner, Store: a.Store, Logger: log, Now: time.Now, Scan: c.Scan})
	if err != nil {
		return nil, err
	}
	pages, err := web.NewPages(nil)
	if err != nil {
		return nil, err
	}
	handler, err := api.New(api.Config{Store: a.Store, Pages: pages, Logger: log, Now: time.Now, Zone: zone, DropFolder: c.Drop, Metrics: metrics,
		Uploads: &api.Uploads{To: a.folder, Limit: c.MaxFileMB * 1e6, Scan: a.schedule.ScanSoon}})
	if err != nil {
		return nil, err
	}
	a.server = &http.Server{
		Handler:           handler,
		ReadHeaderTimeout: 10 * time.Second,
		ReadTimeout:       2 * time.Minute,
		WriteTimeout:      5 * time.Minute,
		IdleTimeout:       2 * time.Minute,
		ErrorLog:          slog.NewLogLogger(log.Handler(), slog.LevelWarn),
	}
	return a, nil
}

func loaderConfig(c Config, store *db.Store, log *slog.Logger, zone *time.Location) jobs.LoaderConfig {
	return jobs.LoaderConfig{Store: store, Logger: log, Zone: zone, MaxBytes: c.MaxFileMB * 1e6, Now: time.Now}
}

// openStore connects to the external database, or runs the private one, and
// brings it to this binary's schema.
func (a *App) openStore(ctx context.Context) (err error) {
	a.cluster, a.Store, err = openStore(ctx, a.config, a.log)
	return err
}

func openStore(ctx context.Context, c Config, log *slog.Logger) (*localpg.Cluster, *db.Store, error) {
	url := string(c.DatabaseURL)
	var cluster *localpg.Cluster
	if url == "" {
		var err error
		if cluster, err = localpg.Start(ctx, localpg.Options{DataDir: filepath.Join(c.Data, "postgres"), Logger: log}); err != nil {
			return nil, nil, err
		}
		url = cluster.URL("epitally")
	}
	stop := func() {
		if cluster != nil {
			cluster.Stop(context.WithoutCancel(ctx))
		}
	}
	if err := db.Migrate(ctx, url); err != nil {
		stop()
		return nil, nil, err
	}
	store, err := db.Open(ctx, db.Config{URL: url, MaxConns: c.DatabaseConnections})
	if err != nil {
		stop()
		return nil, nil, err
	}
	return cluster, store, nil
}

// joinStore is openStore that uses the database of a server that runs on the data
// folder, when one does.
func joinStore(ctx context.Context, c Config, log *slog.Logger) (*localpg.Cluster, *db.Store, error) {
	cluster, store, err := openStore(ctx, c, log)
	if errors.Is(err, localpg.ErrInUse) {
		if url, ok := localpg.Attach(filepath.Join(c.Data, "postgres")); ok {
			c.DatabaseURL = secret(url)
			return openStore(ctx, c, log)
		}
	}
	return cluster, store, err
}

// URL is where the pages are.
func (a *App) URL() string { return "http://" + a.listener.Addr().String() }

// Run serves until ctx ends, then stops within the stop limit.
func (a *App) Run(ctx context.Context) error {
	a.schedule.Start(ctx)
	failed := make(chan error, 1)
	go func() { failed <- a.server.Serve(a.listener) }()
	a.log.Info("ready", "url", a.URL(), "drop_folder", a.config.Drop)
	select {
	case err := <-failed:
		return fmt.Errorf("serve: %w", err)
	case <-ctx.Done():
	}
	limit, cancel := context.WithTimeout(context.WithoutCancel(ctx), seconds(a.config.StopSeconds))
	defer cancel()
	err := a.server.Shutdown(limit)
	if errors.Is(err, context.DeadlineExceeded) {
		a.log.Warn("requests were cut off at the stop limit", "seconds", a.config.StopSeconds)
		err = a.server.Close()
	}
	a.schedule.Stop()
	return err
}

// Close releases everything New took, in reverse. Safe after a failed New and
// when called twice.
func (a *App) Close() {
	if a.schedule != nil {
		a.schedule.Stop()
	}
	if a.listener != nil {
		a.listener.Close()
	}
	if a.Store != nil {
		a.Store.Close()
		a.Store = nil
	}
	if a.cluster != nil {
		if err := a.cluster.Stop(context.Background()); err != nil {
			a.log.Warn("private database", "error", err)
		}
		a.cluster = nil
	}
	if a.folder != nil {
		a.folder.Close()
	}
}

func newLogger(w io.Writer, level string) *slog.Logger {
	var l slog.Level
	l.UnmarshalText([]byte(level)) // Validate has checked it
	return slog.New(slog.NewTextHandler(w, &slog.HandlerOptions{Level: l}))
}

func serve(ctx context.Context, c *console, args []string) error {
	config := defaultConfig()
	flags := flagsFor("serve", &config)
	if err := config.resolve(flags, args, os.Getenv); err != nil {
		return err
	}
	app, err := New(ctx, config, newLogger(c.err, config.LogLevel))
	if err != nil {
		return err
	}
	defer app.Close()
	fmt.Fprintf(c.out, "Epitally is ready at %s\nFiles dropped into %s are loaded within a minute.\n", app.URL(), config.Drop)
	return app.Run(ctx)
}
