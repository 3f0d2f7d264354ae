package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/PuerkitoBio/goquery"
	"github.com/chromedp/chromedp"

	"epitally/analytics/simfab"
	"epitally/db"
)

// testConfig is a server on a free port with its own private database.
func testConfig(t *testing.T) Config {
	t.Helper()
	c := defaultConfig()
	c.Data, c.Listen, c.SettleSeconds, c.Workers = t.TempDir(), "127.0.0.1:0", 0, 2
	c.Drop = filepath.Join(c.Data, "drop")
	return c
}

// startApp runs a server until the test ends. before is called when it is made
// but does not scan yet.
func startApp(t *testing.T, c Config, before func(*App)) *App {
	t.Helper()
	ctx, stop := context.WithCancel(context.Background())
	app, err := New(ctx, c, slog.New(slog.DiscardHandler))
	if err != nil {
		stop()
		t.Fatal(err)
	}
	before(app)
	ended := make(chan error, 1)
	go func() { ended <- app.Run(ctx) }()
	t.Cleanup(func() {
		stop()
		if err := <-ended; err != nil {
			t.Errorf("run: %v", err)
		}
		app.Close()
	})
	return app
}

func page(t *testing.T, url string, wantStatus int) *goquery.Document {
	t.Helper()
	answer, err := http.Get(url)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	if answer.StatusCode != wantStatus {
		body, _ := io.ReadAll(answer.Body)
		t.Fatalf("%s: status %d, want %d: %.300s", url, answer.StatusCode, wantStatus, body)
	}
	doc, err := goquery.NewDocumentFromReader(answer.Body)
	if err != nil {
		t.Fatal(err)
	}
	return doc
}

// TestTheMainJob does what a shift engineer does first: files are dropped, a
// wafer is picked, its map is seen, and its dies' bins under another
// specification.
func TestTheMainJob(t *testing.T) {
	t.Parallel()
	c := testConfig(t)
	ctx := context.Background()
	app := startApp(t, c, func(app *App) {
		if err := writeFab(ctx, simfab.New(simfab.Config{Seed: 3, Wafers: 8}), c.Drop, func(int, int) {}); err != nil {
			t.Error(err)
		}
		if result, err := app.Scanner.Scan(ctx); err != nil || result.Refused != 0 || result.Left != 0 || result.Stored == 0 {
			t.Errorf("scan: %v, %+v", err, result)
		}
	})
	list, err := app.Store.Wafers(ctx, db.WaferFilter{Kind: "probe"})
	if err != nil || list.Total < 6 {
		t.Fatalf("%v: %d wafers with a probe measurement", err, list.Total)
	}
	for _, row := range list.Rows {
		if row.Main == nil || row.Main.Summary.N < 1000 || row.State == "" {
			t.Errorf("wafer %s: state %q, summary %+v", row.Wafer.Name, row.State, row.Main)
		}
	}
	doc := page(t, app.URL()+"/wafers", http.StatusOK)
	if rows := doc.Find("table tbody tr").Length(); rows < 8 {
		t.Errorf("the wafers page shows %d lines; want at least 8", rows)
	}
	wafer := firstTallied(t, list)
	seen := browse(t, app.URL()+"/wafers/"+wafer)
	if !strings.Contains(seen.sentence, wafer) || !strings.Contains(seen.sentence, "%") {
		t.Errorf("the wafer page begins %q; want its number and a yield", seen.sentence)
	}
	page(t, app.URL()+"/wafers/none-such", http.StatusNotFound)
	page(t, app.URL()+"/bins", http.StatusOK)
	page(t, app.URL()+"/loads", http.StatusOK)
}

func firstTallied(t *testing.T, list *db.WaferPage) string {
	t.Helper()
	for _, row := range list.Rows {
		if row.Tally != nil && row.Tally.Good > 0 {
			return row.Wafer.Name
		}
	}
	t.Fatal("no wafer is tallied under a specification")
	return ""
}

type seenPage struct{ sentence, drawn string }

// browser starts a real headless Chromium for the test, a minute at most.
func browser(t *testing.T) context.Context {
	t.Helper()
	options := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.NoSandbox, chromedp.DisableGPU, chromedp.WindowSize(1280, 900))
	ctx, stopAllocator := chromedp.NewExecAllocator(context.Background(), options...)
	ctx, stopBrowser := chromedp.NewContext(ctx)
	ctx, stopTime := context.WithTimeout(ctx, time.Minute)
	t.Cleanup(func() { stopTime(); stopBrowser(); stopAllocator() })
	return ctx
}

// browse opens a wafer in a real headless Chromium and waits for its map.
func browse(t *testing.T, url string) (seen seenPage) {
	t.Helper()
	ctx := browser(t)
	drawn := chromedp.CSS("#map-canvas[data-drawn]")
	if err := chromedp.Do(ctx, chromedp.Navigate(url), chromedp.WaitVisible(drawn)); err != nil {
		t.Fatalf("open %s: %v", url, err)
	}
	attribute, err := chromedp.Run(ctx, chromedp.AttributeValue(drawn, "data-drawn"))
	if err != nil {
		t.Fatal(err)
	}
	seen.drawn = attribute.Value
	if seen.sentence, err = chromedp.Run(ctx, chromedp.Text(chromedp.CSS("main p"))); err != nil {
		t.Fatal(err)
	}
	return seen
}

func TestAnExistingDataFolderIsUsedAgain(t *testing.T) {
	t.Parallel()
	c := testConfig(t)
	log := slog.New(slog.DiscardHandler)
	ctx := context.Background()
	first, err := New(ctx, c, log)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(c.Drop, "one.csv"), []byte(tinyCSV), 0o644); err != nil {
		t.Fatal(err)
	}
	if r, err := first.Scanner.Scan(ctx); err != nil || r.Stored != 1 {
		t.Fatalf("scan: %v, %+v", err, r)
	}
	first.Close()
	second, err := New(ctx, c, log)
	if err != nil {
		t.Fatal(err)
	}
	defer second.Close()
	if _, err := second.Store.Wafer(ctx, "T-1"); err != nil {
		t.Errorf("after a restart: %v", err)
	}
}

const tinyCSV = "# epitally: die readings\n# wafer: T-1\n# lot: L9\n# kind: probe\n# measured at: 2026-11-02T05:00:00Z\n" +
	"x,y,dominant_wavelength_nm,forward_voltage_v\n0,0,455.25,3.101\n1,0,455.75,\n0,1,456.00,3.099\n"

// runCommand runs a command of the binary in this process.
func runCommand(t *testing.T, args ...string) (out, errOut string, err error) {
	t.Helper()
	var o, e bytes.Buffer
	err = dispatch(context.Background(), &console{in: strings.NewReader(""), out: &o, err: &e}, args)
	return o.String(), e.String(), err
}

func TestDryRunSaysWhatAFileWouldGive(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	good, bad := filepath.Join(dir, "good.csv"), filepath.Join(dir, "bad.csv")
	if err := os.WriteFile(good, []byte(tinyCSV), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(bad, []byte(strings.Replace(tinyCSV, "455.75", "45x.75", 1)), 0o644); err != nil {
		t.Fatal(err)
	}
	out, _, err := runCommand(t, "load", "--dry-run", "--json", good)
	if err != nil {
		t.Fatal(err)
	}
	var files []dryFile
	if err := json.Unmarshal([]byte(out), &files); err != nil || len(files) != 1 || !files[0].OK || len(files[0].Wafers) != 1 {
		t.Fatalf("%v: %s", err, out)
	}
	w := files[0].Wafers[0]
	if w.Wafer != "T-1" || w.Lot != "L9" || w.Kind != "probe" || w.Dies != 3 || len(w.Quantities) != 2 {
		t.Errorf("%+v", w)
	}
	if q := w.Quantities[1]; q.Quantity != "forward_voltage_v" || q.Values != 2 || *q.Min != 3.099 || *q.Max != 3.101 {
		t.Errorf("%+v; want two voltages from 3.099 to 3.101", q)
	}
	out, _, err = runCommand(t, "load", "--dry-run", "--json", dir)
	if err == nil {
		t.Error("a file that is not readable left status 0")
	}
	if json.Unmarshal([]byte(out), &files); len(files) != 2 || files[0].OK || !strings.Contains(files[0].Error, "line 8") || files[0].Line != 8 || len(files[0].Wafers) != 0 {
		t.Errorf("the bad file gives %+v; want its line, and no wafer", files[0])
	}
}

func TestDryRunReadsByAProfile(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	profile, file := filepath.Join(dir, "p.yaml"), filepath.Join(dir, "odd.txt")
	for path, text := range map[string]string{
		profile: "profile: odd\nformat: delimited\nmatch: [\"*.txt\"]\ndelimiter: \";\"\nheader: {row: 3}\ncolumns: {x: X, y: Y}\n" +
			"quantities:\n  - {quantity: forward_voltage_v, column: VF, unit: mV}\nconstants: {kind: probe}\n" +
			"facts: {wafer: {label: W}, measured_at: {label: T}}\ntime: {layouts: [\"yyyy-MM-dd HH:mm\"], zone: UTC}\n",
		file: "W;A-7\nT;2026-11-02 05:00\nX;Y;VF\n0;0;3101\n1;0;3099\n",
	} {
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	out, _, err := runCommand(t, "load", "--dry-run", "--profile", profile, file)
	if err != nil || !strings.Contains(out, "A-7") || !strings.Contains(out, "3.099 to 3.101") {
		t.Errorf("%v: %s; want wafer A-7 from 3.099 to 3.101 V", err, out)
	}
}

func TestLoadByHand(t *testing.T) {
	t.Parallel()
	c := testConfig(t)
	file := filepath.Join(t.TempDir(), "one.csv")
	if err := os.WriteFile(file, []byte(tinyCSV), 0o644); err != nil {
		t.Fatal(err)
	}
	out, _, err := runCommand(t, "load", "--data", c.Data, file)
	if err != nil || !strings.Contains(out, "stored 1") || !strings.Contains(out, "3 dies") {
		t.Fatalf("%v: %s", err, out)
	}
	out, said, err := runCommand(t, "load", "--data", c.Data, file)
	if err != nil || !strings.Contains(out, "stored before 1") || !strings.Contains(said, "stored as source") {
		t.Errorf("the same file again: %v: %s%s", err, out, said)
	}
	if _, err := os.Stat(file); err != nil {
		t.Errorf("load moved the file: %v", err)
	}
}

func TestLoadByHandIntoARunningServer(t *testing.T) {
	t.Parallel()
	c := testConfig(t)
	app := startApp(t, c, func(*App) {})
	file := filepath.Join(t.TempDir(), "one.csv")
	if err := os.WriteFile(file, []byte(tinyCSV), 0o644); err != nil {
		t.Fatal(err)
	}
	out, said, err := runCommand(t, "load", "--data", c.Data, file)
	if err != nil || !strings.Contains(out, "stored 1") {
		t.Fatalf("%v: %s%s", err, out, said)
	}
	page(t, app.URL()+"/wafers/T-1", http.StatusOK)
}

func TestCalcSummary(t *testing.T) {
	t.Parallel()
	file := filepath.Join(t.TempDir(), "values.csv")
	if err := os.WriteFile(file, []byte("name,value\na,1\nb,2\nc,3\nd,4\ne,100\nf,\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	out, _, err := runCommand(t, "calc", "summary", file, "--column", "value", "--target", "3", "--json")
	if err != nil {
		t.Fatal(err)
	}
	var s map[string]any
	if err := json.Unmarshal([]byte(out), &s); err != nil {
		t.Fatal(err)
	}
	// The small5 case of the robust checks: median 3, quartiles 2 and 4 (type 7), mean 22.
	for key, want := range map[string]float64{"n": 5, "missing": 1, "median": 3, "q25": 2, "q75": 4, "q05": 1.2, "mean": 22, "within_1": 0.6} {
		if got, ok := s[key].(float64); !ok || fmt.Sprintf("%.9f", got) != fmt.Sprintf("%.9f", want) {
			t.Errorf("%s = %v; want %v", key, s[key], want)
		}
	}
	if _, _, err := runCommand(t, "calc", "summary", file, "--column", "nothing"); err == nil || !strings.Contains(err.Error(), "name, value") {
		t.Errorf("a column that is not there: %v; want the columns that are", err)
	}
}

func TestConfigNamesTheSettingAndTheRule(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		args []string
		says string
	}{
		{[]string{"--listen", "nowhere"}, "listen"},
		{[]string{"--zone", "Mars/Base"}, "zone"},
		{[]string{"--scan", "often"}, "scan"},
		{[]string{"--workers", "7"}, "half"},
		{[]string{"--settle-seconds", "-1"}, "settle-seconds"},
	} {
		config := defaultConfig()
		err := config.resolve(flagsFor("serve", &config), c.args, func(string) string { return "" })
		if err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%v: %v; want it to name %q", c.args, err, c.says)
		}
	}
	file := filepath.Join(t.TempDir(), "settings.yaml")
	if err := os.WriteFile(file, []byte("listen: 127.0.0.1:9000\nzone: Asia/Taipei\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	config := defaultConfig()
	env := func(name string) string {
		return map[string]string{"EPITALLY_ZONE": "Europe/Oslo", "EPITALLY_SCAN": "@every 30s"}[name]
	}
	if err := config.resolve(flagsFor("serve", &config), []string{"--config", file, "--scan", "@every 5s"}, env); err != nil {
		t.Fatal(err)
	}
	if config.Listen != "127.0.0.1:9000" || config.Zone != "Europe/Oslo" || config.Scan != "@every 5s" {
		t.Errorf("listen %s, zone %s, scan %s; want file, environment, flag", config.Listen, config.Zone, config.Scan)
	}
	config.DatabaseURL = "postgres://u:password@h/d"
	if s := fmt.Sprintf("%v", config); strings.Contains(s, "password") {
		t.Errorf("the password prints: %s", s)
	}
}
