package main

import (
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"github.com/goccy/go-yaml"
	"github.com/robfig/cron/v3"
	"github.com/spf13/pflag"

	"epitally/analytics"
)

// Config is everything that can be set. A flag wins over the environment
// (EPITALLY_ and the flag's name in capitals), which wins over the file named
// by --config, which wins over the default.
type Config struct {
	// Data is the folder for the private database and the default drop folder.
	Data string `yaml:"data"`
	// Listen is the address pages and API are served on, HOST:PORT. The default
	// is the loopback only; port 0 takes a free one.
	Listen string `yaml:"listen"`
	// DatabaseURL is a PostgreSQL 15 or newer to use instead of a private one;
	// empty = run a private one in Data.
	DatabaseURL secret `yaml:"database_url"`
	// Drop is the folder scanned for files; empty = "drop" inside Data.
	Drop string `yaml:"drop"`
	// Scan says when the drop folder is scanned: five cron fields, or "@every 30s".
	Scan string `yaml:"scan"`
	// SettleSeconds is how long a file must stay unchanged before it is read.
	SettleSeconds float64 `yaml:"settle_seconds"`
	// Zone is the fab's time zone (IANA name): times on pages, and times that a
	// source writes without a zone.
	Zone string `yaml:"zone"`
	// Workers is how many files are loaded at once; 0 = one per
	// core, but at most half of DatabaseConnections.
	Workers int `yaml:"workers"`
	// MaxFileMB is the largest decompressed source in megabytes (10^6 bytes).
	MaxFileMB int64 `yaml:"max_file_mb"`
	// DatabaseConnections is the size of the connection pool.
	DatabaseConnections int `yaml:"database_connections"`
	// StopSeconds is how long running requests and loads may take at shutdown.
	StopSeconds float64 `yaml:"stop_seconds"`
	// LogLevel is debug, info, warn or error.
	LogLevel string `yaml:"log_level"`
}

// secret prints as stars, so that no log or help text shows a password.
type secret string

func (s secret) String() string {
	if s == "" {
		return ""
	}
	return "***"
}

func defaultConfig() Config {
	return Config{
		Data: defaultDataDir(), Listen: "127.0.0.1:8620", Scan: "* * * * *", SettleSeconds: 2,
		Zone: "UTC", MaxFileMB: 4000, DatabaseConnections: 8, StopSeconds: 10, LogLevel: "info",
	}
}

func defaultDataDir() string {
	if os.Geteuid() == 0 {
		return "/var/lib/epitally"
	}
	if home, err := os.UserHomeDir(); err == nil {
		return filepath.Join(home, ".local", "share", "epitally")
	}
	return "epitally-data"
}

// flagsFor declares the flags of commands that use the database.
func flagsFor(name string, c *Config) *pflag.FlagSet {
	f := pflag.NewFlagSet(name, pflag.ContinueOnError)
	f.SortFlags = false
	f.String("config", "", "YAML `file` with the same settings, words joined by _")
	f.StringVar(&c.Data, "data", c.Data, "`folder` of the private database and the drop folder")
	f.StringVar(&c.Listen, "listen", c.Listen, "`address` to serve on")
	f.StringVar((*string)(&c.DatabaseURL), "database-url", string(c.DatabaseURL), "PostgreSQL `url` to use instead of the private database")
	f.StringVar(&c.Drop, "drop", c.Drop, "`folder` scanned for files (default DATA/drop)")
	f.StringVar(&c.Scan, "scan", c.Scan, "when the drop folder is scanned, a `cron` expression")
	f.Float64Var(&c.SettleSeconds, "settle-seconds", c.SettleSeconds, "`seconds` a file must stay unchanged before it is read")
	f.StringVar(&c.Zone, "zone", c.Zone, "the fab's time `zone`")
	f.IntVar(&c.Workers, "workers", c.Workers, "files loaded at once (0 = one per core)")
	f.Int64Var(&c.MaxFileMB, "max-file-mb", c.MaxFileMB, "largest decompressed source in `MB`")
	f.IntVar(&c.DatabaseConnections, "database-connections", c.DatabaseConnections, "size of the connection pool")
	f.Float64Var(&c.StopSeconds, "stop-seconds", c.StopSeconds, "`seconds` that work may take to end at shutdown")
	f.StringVar(&c.LogLevel, "log-level", c.LogLevel, "debug, info, warn or error")
	return f
}

// resolve parses args over the environment over the file over what c holds.
func (c *Config) resolve(f *pflag.FlagSet, args []string, env func(string) string) error {
	if err := f.Parse(args); err != nil {
		return err
	}
	given := map[string]string{}
	f.Visit(func(fl *pflag.Flag) { given[fl.Name] = fl.Value.String() })
	var problems []error
	path := given["config"]
	if path == "" {
		path = env("EPITALLY_CONFIG")
	}
	if path != "" {
		text, err := os.ReadFile(path)
		if err != nil {
			return fmt.Errorf("--config: %w", err)
		}
		if err := yaml.UnmarshalWithOptions(text, c, yaml.Strict()); err != nil {
			return fmt.Errorf("--config %s: %w: %w", path, err, analytics.ErrInvalid)
		}
	}
	f.VisitAll(func(fl *pflag.Flag) {
		if _, list := fl.Value.(pflag.SliceValue); list {
			return // of no setting, and setting a list again would add to it
		}
		value, inFlags := given[fl.Name]
		if !inFlags {
			value = env("EPITALLY_" + strings.ToUpper(strings.ReplaceAll(fl.Name, "-", "_")))
		}
		if inFlags || value != "" {
			if err := fl.Value.Set(value); err != nil && !inFlags {
				problems = append(problems, fmt.Errorf("EPITALLY_%s: %w", strings.ToUpper(strings.ReplaceAll(fl.Name, "-", "_")), err))
			}
		}
	})
	if c.Drop == "" {
		c.Drop = filepath.Join(c.Data, "drop")
	}
	if c.Workers == 0 {
		c.Workers = max(1, min(runtime.NumCPU(), c.DatabaseConnections/2))
	}
	return errors.Join(append(problems, c.Validate())...)
}

// Validate names the setting and the rule it breaks.
func (c *Config) Validate() error {
	var problems []error
	bad := func(setting, rule string, args ...any) {
		problems = append(problems, fmt.Errorf("%s: %s: %w", setting, fmt.Sprintf(rule, args...), analytics.ErrInvalid))
	}
	if _, _, err := net.SplitHostPort(c.Listen); err != nil {
		bad("listen", "%q is not HOST:PORT", c.Listen)
	}
	if _, err := cron.ParseStandard(c.Scan); err != nil {
		bad("scan", "%q: %v; write five cron fields or \"@every 30s\"", c.Scan, err)
	}
	if !(c.SettleSeconds >= 0 && c.SettleSeconds <= 3600) {
		bad("settle-seconds", "%g is not between 0 and 3600", c.SettleSeconds)
	}
	if _, err := time.LoadLocation(c.Zone); err != nil {
		bad("zone", "%q is not a known time zone; write an IANA name such as Asia/Taipei", c.Zone)
	}
	if c.Workers < 1 || c.Workers > 64 {
		bad("workers", "%d is not between 1 and 64", c.Workers)
	}
	if c.DatabaseConnections < 4 || c.DatabaseConnections > 200 {
		bad("database-connections", "%d is not between 4 and 200", c.DatabaseConnections)
	}
	// Every worker holds a connection while it loads; pages must find one too.
	if c.Workers > c.DatabaseConnections/2 {
		bad("workers", "%d is over half of database-connections (%d); loading may take at most half of the pool", c.Workers, c.DatabaseConnections)
	}
	if c.MaxFileMB < 1 {
		bad("max-file-mb", "%d is not above zero", c.MaxFileMB)
	}
	if !(c.StopSeconds > 0 && c.StopSeconds <= 600) {
		bad("stop-seconds", "%g is not between 0 and 600", c.StopSeconds)
	}
	var level slog.Level
	if err := level.UnmarshalText([]byte(c.LogLevel)); err != nil {
		bad("log-level", "%q is not debug, info, warn or error", c.LogLevel)
	}
	return errors.Join(problems...)
}

func seconds(s float64) time.Duration { return time.Duration(s * float64(time.Second)) }
