package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
	"epitally/jobs"
	"epitally/jobs/reader"
)

// dryFile is what one file would give.
type dryFile struct {
	File   string     `json:"file"`
	OK     bool       `json:"ok"`
	Error  string     `json:"error"`
	Line   int        `json:"line,omitempty"`
	Offset *int64     `json:"offset"` // where in the decompressed bytes reading stopped; null when it did not, or when the line says it
	Format string     `json:"format"`
	Wafers []dryWafer `json:"wafers"`
	Notes  []string   `json:"notices,omitempty"`

	profile *reader.Profile // the file is one
}

type dryWafer struct {
	Wafer      string        `json:"wafer"`
	Lot        string        `json:"lot"`
	Kind       string        `json:"kind"`
	Dies       int           `json:"dies"`
	Remeasured int           `json:"remeasured"`
	Quantities []dryQuantity `json:"quantities"`
}

type dryQuantity struct {
	Quantity string   `json:"quantity"`
	Values   int      `json:"values"`
	Min      *float64 `json:"min"` // null when there is no value
	Max      *float64 `json:"max"`
}

// dryRun reads every file to its end and stores nothing. It ends with status 0
// only when every file is readable.
func dryRun(ctx context.Context, c *console, files []string, profiles []reader.Profile, in reader.Input, asJSON bool) error {
	jobs.DocumentsFirst(files)
	forced := onlyName(profiles)
	results := make([]dryFile, 0, len(files))
	unreadable := 0
	for _, path := range files {
		in.Profiles, in.ProfileName = profiles, forced
		r := dryRead(ctx, path, in)
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if !r.OK {
			unreadable++
		}
		if r.profile != nil { // the files after it may need it, as they would when loaded
			profiles = append(profiles, *r.profile)
		}
		results = append(results, r)
		if !asJSON {
			r.print(c.out)
		}
	}
	if asJSON {
		out := json.NewEncoder(c.out)
		out.SetIndent("", " ")
		if err := out.Encode(results); err != nil {
			return err
		}
	} else {
		fmt.Fprintf(c.out, "%d files: %d readable, %d not\n", len(files), len(files)-unreadable, unreadable)
	}
	if unreadable > 0 {
		return errSaid
	}
	return nil
}

func dryRead(ctx context.Context, path string, in reader.Input) dryFile {
	r := dryFile{File: path, Wafers: []dryWafer{}}
	file, err := os.Open(path)
	if err != nil {
		r.Error = err.Error()
		return r
	}
	defer file.Close()
	in.Name, in.R = path, file
	result, err := reader.Read(ctx, in, reader.Sink{
		Measurement: func(m *reader.Measurement) error {
			r.Wafers = append(r.Wafers, dryWaferOf(m))
			return nil
		},
		RunSheet: func([]reader.RunSheetRow) error { return nil },
		Document: r.checkDocument,
	})
	r.Format, r.Notes = result.Format, result.Notices
	if err == nil {
		r.OK = true
		return r
	}
	r.Error, r.Wafers = analytics.WithSource(err, path).Error(), []dryWafer{} // nothing of it would be stored
	var fault *analytics.Fault
	if errors.As(err, &fault) {
		r.Line = fault.Line
		if fault.Offset >= 0 && fault.Line == 0 {
			r.Offset = &fault.Offset
		}
	}
	return r
}

// checkDocument holds a document to the same rules as loading does.
func (r *dryFile) checkDocument(kind, _, text string) (err error) {
	switch kind {
	case "catalogue":
		_, err = reader.ParseCatalogue([]byte(text))
	case "specification":
		_, err = binning.Parse([]byte(text))
	case "profile":
		var p reader.Profile
		if p, err = reader.ParseProfile([]byte(text)); err == nil {
			r.profile = &p
		}
	}
	return err
}

func dryWaferOf(m *reader.Measurement) dryWafer {
	w := dryWafer{Wafer: m.Wafer, Lot: m.Lot, Kind: m.Kind, Dies: m.Grid.Len(), Remeasured: m.Remeasured, Quantities: []dryQuantity{}}
	for i := range m.Planes {
		w.Quantities = append(w.Quantities, dryQuantityOf(&m.Planes[i]))
	}
	return w
}

func dryQuantityOf(p *wafermap.Plane) dryQuantity {
	q := dryQuantity{Quantity: p.Quantity}
	low, high := math.Inf(1), math.Inf(-1)
	for i, n := 0, p.Len(); i < n; i++ {
		if v := p.Value(i); !math.IsNaN(v) {
			q.Values++
			low, high = min(low, v), max(high, v)
		}
	}
	if q.Values > 0 {
		q.Min, q.Max = &low, &high
	}
	return q
}

func (r *dryFile) print(w io.Writer) {
	if !r.OK {
		fmt.Fprintf(w, "%s: not readable: %s\n", r.File, r.Error)
		return
	}
	fmt.Fprintf(w, "%s: %s, %d wafer measurements\n", r.File, r.Format, len(r.Wafers))
	for _, n := range r.Notes {
		fmt.Fprintf(w, "  note: %s\n", n)
	}
	for _, m := range r.Wafers {
		fmt.Fprintf(w, "  wafer %s, lot %s, %s: %d dies, %d remeasured\n", m.Wafer, orDash(m.Lot), m.Kind, m.Dies, m.Remeasured)
		for _, q := range m.Quantities {
			if q.Min == nil {
				fmt.Fprintf(w, "    %-32s %9d values\n", q.Quantity, q.Values)
				continue
			}
			fmt.Fprintf(w, "    %-32s %9d values  %.6g to %.6g\n", q.Quantity, q.Values, *q.Min, *q.Max)
		}
	}
}

func orDash(s string) string {
	if s == "" {
		return "-"
	}
	return s
}
