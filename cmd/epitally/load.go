package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"sort"
	"strings"
	"time"

	"github.com/schollz/progressbar/v3"

	"epitally/analytics"
	"epitally/db"
	"epitally/jobs"
	"epitally/jobs/reader"
)

// loadOptions are the flags of load besides the shared ones.
type loadOptions struct {
	profileFiles []string
	dryRun, json bool
}

func load(ctx context.Context, c *console, args []string) error {
	config := defaultConfig()
	config.LogLevel = "error"
	var o loadOptions
	flags := flagsFor("load PATH...", &config)
	flags.StringArrayVar(&o.profileFiles, "profile", nil, "reading profile `file` to read delimited text and STDF by (may be repeated)")
	flags.BoolVar(&o.dryRun, "dry-run", false, "read everything, store nothing, and show what each file would give")
	flags.BoolVar(&o.json, "json", false, "with --dry-run: print JSON")
	for _, serving := range []string{"listen", "drop", "scan", "settle-seconds", "workers", "stop-seconds"} {
		flags.MarkHidden(serving) // they may stand in the settings' file, and mean nothing here
	}
	if err := config.resolve(flags, args, os.Getenv); err != nil {
		return err
	}
	if flags.NArg() == 0 {
		return fmt.Errorf("load: name the files or folders to load")
	}
	if o.json && !o.dryRun {
		return fmt.Errorf("load: --json goes with --dry-run")
	}
	profiles, err := readProfiles(o.profileFiles)
	if err != nil {
		return err
	}
	files, err := filesUnder(flags.Args())
	if err != nil {
		return err
	}
	zone, err := time.LoadLocation(config.Zone)
	if err != nil {
		return err
	}
	if o.dryRun {
		return dryRun(ctx, c, files, profiles, reader.Input{Zone: zone, MaxBytes: config.MaxFileMB * 1e6}, o.json)
	}
	return loadFiles(ctx, c, config, zone, files, profiles)
}

func readProfiles(paths []string) ([]reader.Profile, error) {
	var profiles []reader.Profile
	for _, path := range paths {
		text, err := os.ReadFile(path)
		if err != nil {
			return nil, fmt.Errorf("--profile: %w", err)
		}
		p, err := reader.ParseProfile(text)
		if err != nil {
			return nil, analytics.WithSource(err, path)
		}
		profiles = append(profiles, p)
	}
	return profiles, nil
}

// filesUnder lists the plain files named or below the folders named, in order
// of name; a folder without files is an error, since nothing would happen.
func filesUnder(paths []string) ([]string, error) {
	var files []string
	for _, path := range paths {
		info, err := os.Stat(path)
		if err != nil {
			return nil, err
		}
		if !info.IsDir() {
			files = append(files, path)
			continue
		}
		var inside []string
		err = filepath.WalkDir(path, func(p string, d fs.DirEntry, err error) error {
			if err == nil && !d.IsDir() && !strings.HasPrefix(d.Name(), ".") {
				inside = append(inside, p)
			}
			return err
		})
		if err != nil {
			return nil, err
		}
		if len(inside) == 0 {
			return nil, fmt.Errorf("%s: the folder has no files", path)
		}
		sort.Strings(inside)
		files = append(files, inside...)
	}
	return files, nil
}

// loadFiles stores files one after the other, documents and run sheets first as
// a scan does. Files stay where they are.
func loadFiles(ctx context.Context, c *console, config Config, zone *time.Location, files []string, profiles []reader.Profile) error {
	log := newLogger(c.err, config.LogLevel)
	cluster, store, err := joinStore(ctx, config, log)
	if err != nil {
		return err
	}
	if cluster != nil {
		defer cluster.Stop(context.WithoutCancel(ctx))
	}
	defer store.Close()
	jobs.DocumentsFirst(files)
	loader := jobs.NewLoader(loaderConfig(config, store, log, zone))
	run := &manualLoad{console: c, store: store, loader: loader, given: profiles, start: time.Now()}
	if err := run.readProfiles(ctx); err != nil {
		return err
	}
	run.bar = newBar(c.err, totalBytes(files))
	for _, path := range files {
		if err := run.one(ctx, path); err != nil {
			return err
		}
	}
	run.bar.Finish()
	if err := loader.RecomputeStale(ctx); err != nil {
		return err
	}
	return run.report()
}

func totalBytes(files []string) (n int64) {
	for _, path := range files {
		if info, err := os.Stat(path); err == nil {
			n += info.Size()
		}
	}
	return n
}

func newBar(w io.Writer, total int64) *progressbar.ProgressBar {
	return progressbar.NewOptions64(total, progressbar.OptionSetWriter(w), progressbar.OptionShowBytes(true),
		progressbar.OptionSetWidth(30), progressbar.OptionThrottle(100*time.Millisecond), progressbar.OptionClearOnFinish())
}

// manualLoad is the state of one `load`.
type manualLoad struct {
	console  *console
	store    *db.Store
	loader   *jobs.Loader
	given    []reader.Profile // on the command line
	profiles []reader.Profile // given, then stored
	bar      *progressbar.ProgressBar
	start    time.Time

	stored, again, refused int
	wafers                 int
	dies, bytes            int64
}

// readProfiles is done anew after a profile among the files was stored.
func (m *manualLoad) readProfiles(ctx context.Context) error {
	stored, err := m.loader.Profiles(ctx)
	m.profiles = append(append([]reader.Profile(nil), m.given...), stored...)
	return err
}

func (m *manualLoad) one(ctx context.Context, path string) error {
	src, err := m.loadPath(ctx, path)
	switch {
	case err == nil:
		m.stored++
		m.wafers += src.Wafers
		m.dies += src.Dies
		m.bytes += src.Bytes
		for _, n := range src.Notices {
			m.say("%s: note: %s", path, n)
		}
		if src.Format == "profile" {
			return m.readProfiles(ctx)
		}
	case ctx.Err() != nil:
		m.bar.Exit()
		m.report()
		return fmt.Errorf("load: stopped; %s was not stored", path)
	case errors.Is(err, analytics.ErrUnavailable):
		return err
	case errors.Is(err, analytics.ErrDuplicate):
		m.again++
		m.say("%s: %v", path, err)
	default:
		m.refused++
		m.say("refused: %v", err)
		src.Name, src.State, src.Reason = path, db.SourceRefused, err.Error()
		if _, err := m.store.RefuseSource(ctx, src); err != nil {
			return err
		}
	}
	return nil
}

func (m *manualLoad) loadPath(ctx context.Context, path string) (db.Source, error) {
	file, err := os.Open(path)
	if err != nil {
		return db.Source{Offset: -1, SeenAt: time.Now()}, err
	}
	defer file.Close()
	info, err := file.Stat()
	if err != nil {
		return db.Source{Offset: -1, SeenAt: time.Now()}, err
	}
	counted := progressbar.NewReader(file, m.bar)
	return m.loader.Load(ctx, jobs.Incoming{Name: path, R: &counted, Bytes: info.Size(), Profiles: m.profiles, Profile: onlyName(m.given)})
}

// onlyName forces the profile when exactly one was named on the command line.
func onlyName(profiles []reader.Profile) string {
	if len(profiles) == 1 {
		return profiles[0].Name
	}
	return ""
}

func (m *manualLoad) say(format string, args ...any) {
	m.bar.Clear()
	fmt.Fprintf(m.console.err, format+"\n", args...)
}

func (m *manualLoad) report() error {
	took := time.Since(m.start).Seconds()
	fmt.Fprintf(m.console.out, "stored %d, stored before %d, refused %d\n", m.stored, m.again, m.refused)
	fmt.Fprintf(m.console.out, "%d wafer measurements, %d dies, %.1f MB in %.1f s (%.2f million dies/s, %.1f MB/s)\n",
		m.wafers, m.dies, float64(m.bytes)/1e6, took, float64(m.dies)/took/1e6, float64(m.bytes)/took/1e6)
	if m.refused > 0 {
		return errSaid
	}
	return nil
}
