package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/pflag"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/db"
)

// specOptions are the flags of the spec commands besides the shared ones.
type specOptions struct {
	last int
	json bool
}

func specFlags(name string, config *Config, o *specOptions, lastHelp string) *pflag.FlagSet {
	config.LogLevel = "error"
	f := flagsFor(name, config)
	f.IntVar(&o.last, "last", o.last, lastHelp)
	f.BoolVar(&o.json, "json", false, "print JSON")
	for _, serving := range []string{"listen", "drop", "scan", "settle-seconds", "workers", "stop-seconds", "max-file-mb", "zone"} {
		f.MarkHidden(serving) // they may stand in the settings' file, and mean nothing here
	}
	return f
}

// specCheck checks a specification, by itself or against the dies of the last
// wafers.
func specCheck(ctx context.Context, c *console, args []string) error {
	config, o := defaultConfig(), specOptions{}
	f := specFlags("spec check FILE", &config, &o, "also look at the dies of the last `N` wafers it is for, in the database (0 = at none)")
	if err := config.resolve(f, args, os.Getenv); err != nil {
		return err
	}
	if f.NArg() != 1 || o.last < 0 || o.last > 500 {
		return fmt.Errorf("spec check: name one FILE; --last is 0 to 500")
	}
	text, err := os.ReadFile(f.Arg(0))
	if err != nil {
		return err
	}
	spec, err := binning.Parse(text)
	if err != nil {
		return analytics.WithSource(err, f.Arg(0))
	}
	found := spec.Check()
	if o.last > 0 {
		err := withStore(ctx, c, config, func(store *db.Store) error {
			list, err := lastMeasurements(ctx, store, spec, o.last)
			if err != nil {
				return err
			}
			t, err := store.Try(ctx, spec, list, false)
			if err != nil {
				return err
			}
			found, _, err = store.Findings(ctx, t, list)
			return err
		})
		if err != nil {
			return err
		}
	}
	return sayFindings(c.out, spec, found, o.json)
}

func sayFindings(w io.Writer, spec *binning.Spec, found []binning.Finding, asJSON bool) error {
	if asJSON {
		if found == nil {
			found = []binning.Finding{}
		}
		out := json.NewEncoder(w)
		out.SetIndent("", " ")
		return out.Encode(found)
	}
	for _, f := range found {
		fmt.Fprintf(w, "%s: %s", f.Kind, f.Says)
		if f.Dies > 0 {
			fmt.Fprintf(w, "; %d dies lie there", f.Dies)
		}
		if f.Line > 0 {
			fmt.Fprintf(w, " (line %d)", f.Line)
		}
		fmt.Fprintln(w)
	}
	if len(found) == 0 {
		fmt.Fprintf(w, "%s: %d bins, nothing odd\n", spec.Name, spec.Bins())
	}
	return nil
}

// specCompare tells which dies change bins between two specifications.
func specCompare(ctx context.Context, c *console, args []string) error {
	config, o := defaultConfig(), specOptions{last: 20}
	f := specFlags("spec compare A B", &config, &o, "compare on the last `N` wafers that A is for, 1 to 500")
	if err := config.resolve(f, args, os.Getenv); err != nil {
		return err
	}
	if f.NArg() != 2 || o.last < 1 || o.last > 500 {
		return fmt.Errorf("spec compare: name two specifications, each a FILE, a stored NAME or NAME@VERSION; --last is 1 to 500")
	}
	return withStore(ctx, c, config, func(store *db.Store) error {
		var specs [2]*binning.Spec
		for i := range specs {
			var err error
			if specs[i], err = findSpec(ctx, store, f.Arg(i)); err != nil {
				return err
			}
		}
		list, err := lastMeasurements(ctx, store, specs[0], o.last)
		if err != nil {
			return err
		}
		bar := newCountBar(c, "binning wafers twice")
		cmp, err := store.CompareSpecs(ctx, specs[0], specs[1], list, func(done, total int) { setBar(bar, done, total) })
		if err != nil {
			return err
		}
		bar.Finish()
		if o.json {
			return sayComparisonJSON(c.out, cmp)
		}
		return sayComparison(c.out, cmp)
	})
}

// withStore opens the database for a command.
func withStore(ctx context.Context, c *console, config Config, use func(*db.Store) error) error {
	cluster, store, err := joinStore(ctx, config, newLogger(c.err, config.LogLevel))
	if err != nil {
		return err
	}
	defer func() {
		store.Close()
		if cluster != nil {
			cluster.Stop(context.WithoutCancel(ctx))
		}
	}()
	return use(store)
}

func lastMeasurements(ctx context.Context, store *db.Store, spec *binning.Spec, last int) ([]db.Chosen, error) {
	ms, err := store.SelectMeasurements(ctx, db.Selection{Kind: spec.Kind, Products: spec.Products, Last: last})
	if err != nil {
		return nil, err
	}
	if len(ms) == 0 {
		return nil, fmt.Errorf("no %s measurement of %s is stored to look at", spec.Kind, orAnyProduct(spec.Products))
	}
	return store.Counting(ctx, ms)
}

func orAnyProduct(products []string) string {
	if len(products) == 0 {
		return "any product"
	}
	return strings.Join(products, ", ")
}

// findSpec reads a file, or a stored specification NAME or NAME@VERSION.
func findSpec(ctx context.Context, store *db.Store, text string) (*binning.Spec, error) {
	if document, err := os.ReadFile(text); err == nil {
		spec, err := binning.Parse(document)
		return spec, analytics.WithSource(err, text)
	}
	name, versionText, versioned := strings.Cut(text, "@")
	version := 0
	if versioned {
		var err error
		if version, err = strconv.Atoi(versionText); err != nil || version < 1 {
			return nil, fmt.Errorf("%s: %q is not a version", text, versionText)
		}
	}
	stored, err := store.Spec(ctx, name, version)
	if err != nil {
		return nil, fmt.Errorf("%s is neither a file nor a stored specification: %w", text, err)
	}
	spec, err := binning.Parse([]byte(stored.Document))
	return spec, analytics.WithSource(err, text)
}

func sayComparison(w io.Writer, c *db.Comparison) error {
	currency := c.After.Spec.Currency
	if currency == "" {
		currency = c.Before.Spec.Currency
	}
	good := func(t *db.Trial) string {
		return fmt.Sprintf("%d of %d dies (%.2f %%)", t.Good(), t.Denominator, 100*float64(t.Good())/float64(max(1, t.Denominator)))
	}
	fmt.Fprintf(w, "On %d wafers %s sells %s, %s sells %s: %+d dies", c.Before.Wafers, c.Before.Spec.Name, good(c.Before), c.After.Spec.Name, good(c.After), c.After.Good()-c.Before.Good())
	priced := c.Before.Value() != 0 || c.After.Value() != 0
	if priced {
		fmt.Fprintf(w, ", %+.2f %s", c.After.Value()-c.Before.Value(), currency)
	}
	fmt.Fprintln(w, ".")
	if len(c.Moves) == 0 {
		fmt.Fprintln(w, "No die changes bins.")
		return nil
	}
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "\nfrom\tto\tdies\twafers\t")
	if priced {
		fmt.Fprintf(t, "%s\t", orWord(currency, "value"))
	}
	fmt.Fprintln(t)
	for _, m := range c.Moves {
		fmt.Fprintf(t, "%s\t%s\t%d\t%d\t", m.From, m.To, m.Dies, m.Wafers)
		if priced {
			fmt.Fprintf(t, "%+.2f\t", m.Value)
		}
		fmt.Fprintln(t)
	}
	fmt.Fprintf(t, "\nwafer\tdies that change\tsell before\tsell after\t")
	if priced {
		fmt.Fprintf(t, "%s\t", orWord(currency, "value"))
	}
	fmt.Fprintln(t)
	for _, x := range c.Wafers {
		fmt.Fprintf(t, "%s\t%d\t%d\t%d\t", x.Wafer, x.Moved, x.GoodBefore, x.GoodAfter)
		if priced {
			fmt.Fprintf(t, "%+.2f\t", x.Value)
		}
		fmt.Fprintln(t)
	}
	return t.Flush()
}

func orWord(text, fallback string) string {
	if text == "" {
		return fallback
	}
	return text
}

// comparisonJSON is a comparison as programs read it.
type comparisonJSON struct {
	Wafers      int            `json:"wafers"`
	Denominator int            `json:"denominator"`
	GoodBefore  int            `json:"good_before"`
	GoodAfter   int            `json:"good_after"`
	ValueBefore float64        `json:"value_before"`
	ValueAfter  float64        `json:"value_after"`
	Currency    string         `json:"currency"`
	Moves       []moveJSON     `json:"moves"`
	ByWafer     []transferJSON `json:"by_wafer"`
}

type moveJSON struct {
	From   string  `json:"from"`
	To     string  `json:"to"`
	Dies   int     `json:"dies"`
	Wafers int     `json:"wafers"`
	Value  float64 `json:"value"`
}

type transferJSON struct {
	Wafer      string  `json:"wafer"`
	Moved      int     `json:"moved"`
	GoodBefore int     `json:"good_before"`
	GoodAfter  int     `json:"good_after"`
	Value      float64 `json:"value"`
}

func sayComparisonJSON(w io.Writer, c *db.Comparison) error {
	out := comparisonJSON{Wafers: c.Before.Wafers, Denominator: c.Before.Denominator, GoodBefore: c.Before.Good(), GoodAfter: c.After.Good(),
		ValueBefore: c.Before.Value(), ValueAfter: c.After.Value(), Currency: orWord(c.After.Spec.Currency, c.Before.Spec.Currency),
		Moves: []moveJSON{}, ByWafer: []transferJSON{}}
	for _, m := range c.Moves {
		out.Moves = append(out.Moves, moveJSON(m))
	}
	for _, x := range c.Wafers {
		out.ByWafer = append(out.ByWafer, transferJSON(x))
	}
	e := json.NewEncoder(w)
	e.SetIndent("", " ")
	return e.Encode(out)
}
