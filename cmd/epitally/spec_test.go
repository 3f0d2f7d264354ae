package main

import (
	"encoding/json"
	"io"
	"net/http"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"epitally/analytics/simfab"
)

// greenFab is a server with an invented fab's wafers, green ones among them.
func greenFab(t *testing.T) (*App, Config) {
	t.Helper()
	c := testConfig(t)
	app := startApp(t, c, func(app *App) {
		if err := writeFab(t.Context(), simfab.New(simfab.Config{Seed: 3, Wafers: 8}), c.Drop, func(int, int) {}); err != nil {
			t.Error(err)
		}
		if result, err := app.Scanner.Scan(t.Context()); err != nil || result.Refused != 0 {
			t.Errorf("scan: %v, %+v", err, result)
		}
	})
	return app, c
}

// TestASpecificationIsChangedByHand drags a corner of a customer's chromaticity
// region in a real browser, sees all wafers binned anew, and publishes the change.
func TestASpecificationIsChangedByHand(t *testing.T) {
	t.Parallel()
	app, c := greenFab(t)
	ctx := browser(t)
	corner := chromedp.CSS("svg.binplot circle.handle")
	if err := chromedp.Do(ctx, chromedp.Navigate(app.URL()+"/bins/reed-green"), chromedp.WaitVisible(corner)); err != nil {
		t.Fatal(err)
	}
	seen := func(expression string) string {
		t.Helper()
		v, err := chromedp.Run(ctx, chromedp.Evaluate[string](expression))
		if err != nil {
			t.Fatalf("%s: %v", expression, err)
		}
		return v
	}
	const document, verdict = `document.querySelector('#editor textarea').value`, `document.querySelector('.verdict').textContent`
	if text := seen(document); !strings.Contains(text, "[0.1460, 0.6842]") {
		t.Fatalf("the editor holds %q", text)
	}
	// The outer corner of G1 goes up and to the left, by the pointer.
	seen(`(() => {
		const handle = [...document.querySelectorAll('circle.handle')].find((h) => h.getAttribute('aria-label').includes('(0.146, 0.6842)'));
		const at = handle.getBoundingClientRect();
		const event = (name, dx, dy) => new PointerEvent(name, { bubbles: true, button: 0, clientX: at.x + dx, clientY: at.y + dy });
		handle.dispatchEvent(event('pointerdown', 0, 0));
		window.dispatchEvent(event('pointermove', -40, -30));
		window.dispatchEvent(event('pointerup', -40, -30));
		return '';
	})()`)
	changed := chromedp.CSS("#editor button[type=submit]:enabled")
	if err := chromedp.Do(ctx, chromedp.WaitVisible(changed)); err != nil {
		t.Fatalf("nothing can be published after a change: %v; the fault says %q", err, seen(`document.getElementById('fault').textContent`))
	}
	text := seen(document)
	if strings.Contains(text, "[0.1460, 0.6842]") || !strings.Contains(text, "[0.1604, 0.6572]") || strings.Count(text, "\n") < 30 {
		t.Errorf("the corner did not move in the document, or others did:\n%s", text)
	}
	if says := seen(verdict); !strings.Contains(says, "before the change") {
		t.Errorf("the verdict is %q", says)
	}
	// A faulty document is explained, and cannot be published.
	seen(`(() => { const t = document.querySelector('#editor textarea'); t.value = t.value.replace('circle', 'cirkel'); t.dispatchEvent(new Event('input')); return ''; })()`)
	if err := chromedp.Do(ctx, chromedp.WaitVisible(chromedp.CSS("#fault:not([hidden])"))); err != nil {
		t.Fatal(err)
	}
	if fault := seen(`document.getElementById('fault').textContent`); !strings.Contains(fault, "cirkel") || !strings.Contains(fault, "line ") {
		t.Errorf("the fault is %q", fault)
	}
	seen(`(() => { const t = document.querySelector('#editor textarea'); t.value = t.value.replace('cirkel', 'circle'); t.dispatchEvent(new Event('input')); return ''; })()`)
	if err := chromedp.Do(ctx, chromedp.WaitVisible(changed)); err != nil {
		t.Fatal(err)
	}
	seen(`(() => { const f = document.getElementById('editor'); f.elements.author.value = 'R. Aalto'; f.elements.reason.value = 'G1 reaches further'; f.requestSubmit(); return ''; })()`)
	if err := chromedp.Do(ctx, chromedp.WaitVisible(chromedp.CSS("tr:nth-child(2) a[href$=\"version=1\"]"))); err != nil {
		t.Fatal(err)
	}
	stored, err := app.Store.Spec(t.Context(), "reed-green", 0)
	if err != nil || stored.Version != 2 || stored.Author != "R. Aalto" || stored.Reason != "G1 reaches further" || stored.Document != text {
		t.Errorf("%v: %+v", err, stored)
	}
	compareVersions(t, c)
	page(t, app.URL()+"/bins/reed-green?version=1&view=whole", http.StatusOK)
}

// compareVersions asks what the change is worth, beside the running server.
func compareVersions(t *testing.T, c Config) {
	t.Helper()
	out, said, err := runCommand(t, "spec", "compare", "reed-green@1", "reed-green", "--data", c.Data, "--last", "5", "--json")
	if err != nil {
		t.Fatalf("%v: %s%s", err, out, said)
	}
	var got comparisonJSON
	if err := json.Unmarshal([]byte(out), &got); err != nil {
		t.Fatal(err)
	}
	gained := 0
	for _, m := range got.Moves {
		if strings.HasPrefix(m.To, "G1") && !strings.HasPrefix(m.From, "G1") {
			gained += m.Dies
		}
	}
	if got.Wafers == 0 || gained == 0 || got.GoodAfter-got.GoodBefore < gained/2 || got.ValueAfter <= got.ValueBefore || got.Currency != "EUR" {
		t.Errorf("%d dies gained: %+v", gained, got)
	}
	text, _, err := runCommand(t, "spec", "compare", "reed-green@1", "reed-green", "--data", c.Data, "--last", "1")
	if err != nil || !strings.Contains(text, "On 1 wafers reed-green sells") || !strings.Contains(text, "dies that change") {
		t.Errorf("%v: %s", err, text)
	}
	if _, _, err := runCommand(t, "spec", "compare", "reed-green@9", "reed-green", "--data", c.Data); err == nil || !strings.Contains(err.Error(), "neither a file nor a stored specification") {
		t.Errorf("a version there is not: %v", err)
	}
}

func TestSpecCheck(t *testing.T) {
	t.Parallel()
	file := filepath.Join(t.TempDir(), "s.yaml")
	write := func(text string) {
		t.Helper()
		if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	write(reedGreen)
	out, _, err := runCommand(t, "spec", "check", file)
	if err != nil || strings.Count(out, "overlap: cells core and ") != 2 {
		t.Errorf("%v: %s", err, out)
	}
	write(harbourBlue)
	if out, _, err = runCommand(t, "spec", "check", file); err != nil || out != "harbour-blue: 32 bins, nothing odd\n" {
		t.Errorf("%v: %s", err, out)
	}
	if out, _, err = runCommand(t, "spec", "check", file, "--json"); err != nil || strings.TrimSpace(out) != "[]" {
		t.Errorf("%v: %s", err, out)
	}
	write("specification: x\nkind: pl\naxes: [{axis: W, quantity: q_nm, edges: [2, 1]}]\n")
	if _, _, err = runCommand(t, "spec", "check", file); err == nil || !strings.Contains(err.Error(), file+": line 3") {
		t.Errorf("a faulty file: %v", err)
	}
	if _, _, err = runCommand(t, "spec", "check"); err == nil {
		t.Error("no file is enough")
	}
}

func TestSpecCheckLooksAtDies(t *testing.T) {
	t.Parallel()
	_, c := greenFab(t)
	file := filepath.Join(t.TempDir(), "s.yaml")
	if err := os.WriteFile(file, []byte(reedGreen), 0o600); err != nil {
		t.Fatal(err)
	}
	out, said, err := runCommand(t, "spec", "check", file, "--data", c.Data, "--last", "5")
	if err != nil || !strings.Contains(out, "dies lie there") || !strings.Contains(out, "empty: no die of the last ") {
		t.Errorf("%v: %s%s", err, out, said)
	}
}

// TestMetricsTellWhatWasLoaded reads what a monitoring system would.
func TestMetricsTellWhatWasLoaded(t *testing.T) {
	t.Parallel()
	app, _ := greenFab(t)
	page(t, app.URL()+"/wafers", http.StatusOK)
	answer, err := http.Get(app.URL() + "/metrics")
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	text, err := io.ReadAll(answer.Body)
	if err != nil || answer.StatusCode != http.StatusOK {
		t.Fatalf("%d %v", answer.StatusCode, err)
	}
	figures := map[string]float64{}
	for _, line := range strings.Split(string(text), "\n") {
		if name, value, ok := strings.Cut(line, " "); ok && !strings.HasPrefix(line, "#") {
			if figures[name], err = strconv.ParseFloat(value, 64); err != nil {
				t.Errorf("%q: %v", line, err)
			}
		}
	}
	if figures[`epitally_sources_total{state="stored"}`] < 16 || figures[`epitally_sources_total{state="refused"}`] != 0 || figures["epitally_dies_stored_total"] < 50_000 ||
		figures["epitally_wafers_stored_total"] != 16 || figures["epitally_source_lag_seconds_count"] != figures[`epitally_sources_total{state="stored"}`] ||
		figures[`epitally_request_seconds_count{method="GET",route="/wafers",status="200"}`] != 1 || figures["epitally_scan_seconds_count"] < 1 {
		t.Errorf("%v", figures)
	}
	if _, there := figures[`epitally_sources_total{state="refused"}`]; !there {
		t.Error("refusals are not counted from the start")
	}
}

// TestUploadsAreLoaded sends a file as the page and a station's script do, and
// finds its wafer; what is no file is refused.
func TestUploadsAreLoaded(t *testing.T) {
	t.Parallel()
	c := testConfig(t)
	app := startApp(t, c, func(*App) {})
	send := func(name, content string) (int, string) {
		t.Helper()
		answer, err := http.Post(app.URL()+"/api/v1/sources?name="+name, "application/octet-stream", strings.NewReader(content))
		if err != nil {
			t.Fatal(err)
		}
		defer answer.Body.Close()
		text, _ := io.ReadAll(answer.Body)
		return answer.StatusCode, string(text)
	}
	if status, text := send("one.csv", tinyCSV); status != http.StatusAccepted || !strings.Contains(text, `"source":"one.csv"`) {
		t.Fatalf("%d %s", status, text)
	}
	limit := time.Now().Add(20 * time.Second)
	for {
		if _, err := app.Store.Wafer(t.Context(), "T-1"); err == nil {
			break
		}
		if time.Now().After(limit) {
			t.Fatal("the uploaded file was not loaded")
		}
		app.schedule.Scan()
	}
	for name, want := range map[string]int{"..%2Fout.csv": http.StatusBadRequest, "": http.StatusBadRequest, "a%00b": http.StatusBadRequest} {
		if status, text := send(name, "x"); status != want || !strings.Contains(text, "detail") {
			t.Errorf("%q: %d %s", name, status, text)
		}
	}
}

// TestDoctorBesideARunningServer examines the invented fab while its server runs.
func TestDoctorBesideARunningServer(t *testing.T) {
	t.Parallel()
	_, c := greenFab(t)
	out, said, err := runCommand(t, "doctor", "--data", c.Data)
	if err != nil || !strings.HasPrefix(out, "The database is sound: every plane decodes") {
		t.Errorf("%v: %s%s", err, out, said)
	}
	if out, _, err = runCommand(t, "doctor", "--data", c.Data, "--quick", "--json"); err != nil || strings.TrimSpace(out) != "[]" {
		t.Errorf("%v: %s", err, out)
	}
}
