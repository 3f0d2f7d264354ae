package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/pflag"

	"epitally/analytics"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
	"epitally/jobs/reader"
)

// summaryOptions are the flags of calc summary.
type summaryOptions struct {
	column, x, y       string
	delimiter          string
	target             float64
	catalogue, product string
	json               bool
}

func calcSummary(_ context.Context, c *console, args []string) error {
	o := summaryOptions{}
	f := pflag.NewFlagSet("calc summary FILE", pflag.ContinueOnError)
	f.SortFlags = false
	f.StringVar(&o.column, "column", "", "`name` of the column, or its number from 1")
	f.StringVar(&o.delimiter, "delimiter", ",", "field `separator`; \"tab\" for a tab")
	f.Float64Var(&o.target, "target", math.NaN(), "`value` for the shares within ±1, ±2 and ±5")
	f.StringVar(&o.catalogue, "catalogue", "", "catalogue `file` with the product's layout, for its edge exclusion")
	f.StringVar(&o.product, "product", "", "`product` in the catalogue")
	f.StringVar(&o.x, "x", "x", "`column` of the die coordinate x, with --catalogue")
	f.StringVar(&o.y, "y", "y", "`column` of the die coordinate y, with --catalogue")
	f.BoolVar(&o.json, "json", false, "print JSON")
	if err := f.Parse(args); err != nil {
		return err
	}
	if f.NArg() != 1 || o.column == "" {
		return fmt.Errorf("calc summary: name one FILE (or - for standard input) and --column")
	}
	s, err := summariseFile(c.in, f.Arg(0), o)
	if err != nil {
		return err
	}
	if o.json {
		out := json.NewEncoder(c.out)
		out.SetIndent("", " ")
		return out.Encode(s)
	}
	printSummary(c.out, s)
	return nil
}

func summariseFile(stdin io.Reader, path string, o summaryOptions) (uniformity.Summary, error) {
	in := stdin
	if path != "-" {
		file, err := os.Open(path)
		if err != nil {
			return uniformity.Summary{}, err
		}
		defer file.Close()
		in = file
	}
	var layout *wafermap.Layout
	if o.catalogue != "" {
		l, err := layoutFromCatalogue(o.catalogue, o.product)
		if err != nil {
			return uniformity.Summary{}, err
		}
		layout = l
	}
	values, excluded, err := readColumn(in, o, layout)
	if err != nil {
		return uniformity.Summary{}, analytics.WithSource(err, path)
	}
	s := uniformity.Describe(values, o.target)
	s.Excluded = excluded
	return s, nil
}

func layoutFromCatalogue(path, product string) (*wafermap.Layout, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("--catalogue: %w", err)
	}
	cat, err := reader.ParseCatalogue(text)
	if err != nil {
		return nil, analytics.WithSource(err, path)
	}
	for _, p := range cat.Products {
		if p.Name == product {
			return &p.Layout, nil
		}
	}
	return nil, fmt.Errorf("--product %q is not in %s: %w", product, path, analytics.ErrNotFound)
}

// readColumn reads one column of delimited text, NaN where a field is empty or
// says nan or NA. Lines that begin with # are passed over. A first row of which
// every field is a number is data, else it is the header.
func readColumn(in io.Reader, o summaryOptions, layout *wafermap.Layout) (values []float64, excluded int, err error) {
	rows := csv.NewReader(in)
	rows.Comment, rows.ReuseRecord, rows.FieldsPerRecord = '#', true, -1
	if o.delimiter == "tab" {
		o.delimiter = "\t"
	}
	if len([]rune(o.delimiter)) != 1 {
		return nil, 0, fmt.Errorf("--delimiter %q is not one character: %w", o.delimiter, analytics.ErrInvalid)
	}
	rows.Comma = []rune(o.delimiter)[0]
	rows.TrimLeadingSpace = true
	first, err := rows.Read()
	if err != nil {
		return nil, 0, csvFault(err)
	}
	header := append([]string(nil), first...)
	pick, err := newPicker(header, o, layout)
	if err != nil {
		return nil, 0, err
	}
	take := func(row []string) error {
		v, inside, err := pick.value(row, rows)
		if err == nil && inside {
			values = append(values, v)
		} else if err == nil {
			excluded++
		}
		return err
	}
	if allNumbers(header) {
		if err := take(header); err != nil {
			return nil, 0, err
		}
	}
	for {
		row, err := rows.Read()
		if errors.Is(err, io.EOF) {
			return values, excluded, nil
		}
		if err != nil {
			return nil, 0, csvFault(err)
		}
		if err := take(row); err != nil {
			return nil, 0, err
		}
	}
}

func csvFault(err error) error {
	var at *csv.ParseError
	if errors.As(err, &at) {
		return &analytics.Fault{Line: at.Line, Column: at.Column, Offset: -1, Problem: at.Err.Error()}
	}
	if errors.Is(err, io.EOF) {
		return &analytics.Fault{Offset: -1, Problem: "the file is empty"}
	}
	return err
}

func allNumbers(fields []string) bool {
	for _, f := range fields {
		if _, err := strconv.ParseFloat(strings.TrimSpace(f), 64); err != nil {
			return false
		}
	}
	return true
}

// picker takes the value out of a row, and says whether its die counts.
type picker struct {
	column, x, y int
	layout       *wafermap.Layout
}

func newPicker(header []string, o summaryOptions, layout *wafermap.Layout) (p picker, err error) {
	p.layout = layout
	if p.column, err = findColumn(header, o.column); err != nil || layout == nil {
		return p, err
	}
	if p.x, err = findColumn(header, o.x); err != nil {
		return p, err
	}
	p.y, err = findColumn(header, o.y)
	return p, err
}

func findColumn(header []string, name string) (int, error) {
	for i, h := range header {
		if strings.TrimSpace(h) == name {
			return i, nil
		}
	}
	if n, err := strconv.Atoi(name); err == nil && n >= 1 && n <= len(header) {
		return n - 1, nil
	}
	return 0, &analytics.Fault{Line: 1, Offset: -1, Problem: fmt.Sprintf("there is no column %q", name),
		Remedy: "the columns are " + strings.Join(header, ", ")}
}

func (p picker) value(row []string, at *csv.Reader) (v float64, inside bool, err error) {
	if p.layout != nil {
		x, err := whole(row, p.x, at)
		if err != nil {
			return 0, false, err
		}
		y, err := whole(row, p.y, at)
		if err != nil {
			return 0, false, err
		}
		if !p.layout.Inside(x, y) {
			return 0, false, nil
		}
	}
	text := ""
	if p.column < len(row) {
		text = strings.TrimSpace(row[p.column])
	}
	if text == "" || strings.EqualFold(text, "nan") || text == "NA" {
		return math.NaN(), true, nil
	}
	v, err = strconv.ParseFloat(text, 64)
	if err != nil || math.IsInf(v, 0) {
		line, column := at.FieldPos(p.column)
		return 0, false, &analytics.Fault{Line: line, Column: column, Offset: -1,
			Problem: fmt.Sprintf("%q is not a finite number", text), Remedy: "leave the field empty for no value"}
	}
	return v, true, nil
}

func whole(row []string, column int, at *csv.Reader) (int, error) {
	if column < len(row) {
		if n, err := strconv.Atoi(strings.TrimSpace(row[column])); err == nil {
			return n, nil
		}
	}
	line, _ := at.FieldPos(0)
	return 0, &analytics.Fault{Line: line, Offset: -1, Problem: "the die coordinate is not a whole number"}
}

func printSummary(w io.Writer, s uniformity.Summary) {
	fmt.Fprintf(w, "values              %d\nmissing             %d\n", s.N, s.Missing)
	if s.Excluded > 0 {
		fmt.Fprintf(w, "in edge exclusion   %d\n", s.Excluded)
	}
	for _, line := range []struct {
		name  string
		value float64
	}{
		{"mean", s.Mean}, {"sd (n-1)", s.SD}, {"min", s.Min}, {"1 % quantile", s.Q01}, {"5 % quantile", s.Q05},
		{"25 % quantile", s.Q25}, {"median", s.Median}, {"75 % quantile", s.Q75}, {"95 % quantile", s.Q95},
		{"99 % quantile", s.Q99}, {"max", s.Max}, {"robust sd", s.RobustSD},
	} {
		fmt.Fprintf(w, "%-18s  %.10g\n", line.name, line.value)
	}
	if !math.IsNaN(s.Target) {
		fmt.Fprintf(w, "within ±1, ±2, ±5 of %g:  %.1f %%, %.1f %%, %.1f %%\n", s.Target, 100*s.Within1, 100*s.Within2, 100*s.Within5)
	}
}
