package main

import (
	"os/exec"
	"strings"
	"testing"
)

// mayImport is DESIGN's direction of imports: folder → what it may import of
// this module. cmd may import everything.
var mayImport = map[string][]string{
	"analytics":  {"analytics"},
	"migrations": {},
	"db":         {"db", "analytics", "migrations"},
	"web":        {"web", "analytics", "db"},
	"jobs":       {"jobs", "db", "analytics"},
	"api":        {"api", "web", "db", "analytics"},
}

// onlyUnder confines a dependency to folders.
var onlyUnder = map[string][]string{
	"github.com/jackc/pgx":        {"db"},
	"github.com/pressly/goose":    {"db"},
	"github.com/labstack/echo":    {"api", "cmd"},
	"github.com/robfig/cron":      {"jobs", "cmd"},
	"github.com/go-echarts":       {"web"},
	"github.com/prometheus":       {"api", "jobs", "cmd"},
	"github.com/chromedp":         {"cmd", "web"},
	"net/http":                    {"api", "web", "cmd"},
	"database/sql":                {"db"},
	"os":                          {"db", "web", "jobs", "cmd", "migrations"},
	"log/slog":                    {"db", "web", "jobs", "api", "cmd"},
	"github.com/spf13/pflag":      {"cmd"},
	"github.com/schollz/progress": {"cmd"},
}

// analyticsNever are packages of the world outside: analytics is pure.
var analyticsNever = []string{"os", "net", "net/http", "database/sql", "io/fs", "log", "log/slog", "os/exec"}

func TestImportsRunOneWay(t *testing.T) {
	t.Parallel()
	out, err := exec.Command("go", "list", "-f", `{{.ImportPath}} {{join .Imports " "}}`, "epitally/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	lines := strings.Split(strings.TrimSpace(string(out)), "\n")
	if len(lines) < 10 {
		t.Fatalf("go list named %d packages; this test would prove nothing", len(lines))
	}
	for _, line := range lines {
		fields := strings.Fields(line)
		from := folder(fields[0])
		for _, to := range fields[1:] {
			checkImport(t, fields[0], from, to)
		}
	}
}

func checkImport(t *testing.T, pkg, from, to string) {
	t.Helper()
	if rest, inside := strings.CutPrefix(to, "epitally/"); inside && from != "cmd" {
		if !contains(mayImport[from], strings.SplitN(rest, "/", 2)[0]) {
			t.Errorf("%s imports %s: %s may import only %v", pkg, to, from, mayImport[from])
		}
	}
	for confined, where := range onlyUnder {
		if (to == confined || strings.HasPrefix(to, confined+"/")) && !contains(where, from) {
			t.Errorf("%s imports %s, which belongs under %v", pkg, to, where)
		}
	}
	if from == "analytics" && contains(analyticsNever, to) {
		t.Errorf("%s imports %s: analytics is pure", pkg, to)
	}
}

func folder(importPath string) string {
	parts := strings.Split(importPath, "/")
	return parts[min(1, len(parts)-1)]
}

func contains(list []string, s string) bool {
	for _, l := range list {
		if l == s {
			return true
		}
	}
	return false
}
