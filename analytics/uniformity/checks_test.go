package uniformity

import (
	"encoding/json"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"epitally/testdata/sharedtest"
)

// tolerance is a bare number (absolute) or {"rel": r, "abs": a}: within either passes.
type tolerance struct{ Rel, Abs float64 }

func (t *tolerance) UnmarshalJSON(b []byte) error {
	if err := json.Unmarshal(b, &t.Abs); err == nil {
		return nil
	}
	type plain tolerance
	return json.Unmarshal(b, (*plain)(t))
}

func (t tolerance) accepts(got, want float64) bool {
	return math.Abs(got-want) <= max(t.Abs, t.Rel*math.Abs(want))
}

type checkCase struct {
	ID    string
	Input struct {
		Values     []float64
		ValuesFile string `json:"values_file"`
	}
	Expect map[string]json.RawMessage
	Tol    map[string]json.RawMessage
}

func checkCases(t *testing.T, path string) []checkCase {
	t.Helper()
	var file struct{ Cases []checkCase }
	if err := json.Unmarshal(sharedtest.Read(t, "reference/"+path), &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Cases) == 0 {
		t.Fatalf("%s holds no cases", path)
	}
	return file.Cases
}

// check compares one figure under the case's own tolerance.
func (c checkCase) check(t *testing.T, key string, got float64) {
	t.Helper()
	var want float64
	if err := json.Unmarshal(c.Expect[key], &want); err != nil {
		t.Fatalf("%s: %s: %v", c.ID, key, err)
	}
	raw, ok := c.Tol[key]
	if !ok {
		raw = c.Tol["default"]
	}
	var tol tolerance
	if err := json.Unmarshal(raw, &tol); err != nil {
		t.Fatalf("%s: tolerance of %s: %v", c.ID, key, err)
	}
	if !tol.accepts(got, want) {
		t.Errorf("%s: %s = %.16g, certified %.16g", c.ID, key, got, want)
	}
}

// TestNISTUnivariate reaches the certified values of the NIST Statistical
// Reference Datasets.
func TestNISTUnivariate(t *testing.T) {
	t.Parallel()
	for _, c := range checkCases(t, "checks/nist_strd_univariate.json") {
		values := c.Input.Values
		if c.Input.ValuesFile != "" {
			for line := range strings.Lines(string(sharedtest.Read(t, "reference/"+c.Input.ValuesFile))) {
				// Two lines of heading, a comment and the column's name, are not numbers.
				if v, err := strconv.ParseFloat(strings.TrimSpace(line), 64); err == nil {
					values = append(values, v)
				}
			}
			if len(values) != 5000 {
				t.Fatalf("%s: %d values", c.ID, len(values))
			}
		}
		before := slices.Clone(values)
		s := Describe(values, math.NaN())
		c.check(t, "mean", s.Mean)
		c.check(t, "sd", s.SD)
		c.check(t, "lag1_autocorrelation", Lag1Autocorrelation(values))
		if !slices.Equal(values, before) {
			t.Errorf("%s: the input was changed", c.ID)
		}
	}
}

// TestRobustStatistics reaches the reference calculation's values.
func TestRobustStatistics(t *testing.T) {
	t.Parallel()
	for _, c := range checkCases(t, "checks/stats_robust.json") {
		s := Describe(c.Input.Values, math.NaN())
		for key, got := range map[string]float64{
			"median": s.Median, "mad": s.RobustSD / madFactor, "mad_sigma": s.RobustSD, "q1_type7": s.Q25, "q3_type7": s.Q75,
			"p05": s.Q05, "p95": s.Q95, "mean": s.Mean, "sd": s.SD,
		} {
			c.check(t, key, got)
		}
	}
}
