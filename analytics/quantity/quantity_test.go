package quantity

import (
	"errors"
	"math"
	"strings"
	"testing"

	"epitally/analytics"
)

func TestBuiltinQuantitiesAreWellFormed(t *testing.T) {
	t.Parallel()
	seen := map[string]bool{}
	for _, q := range Builtin() {
		if !ValidName(q.Name) || q.Label == "" || !(q.Resolution > 0) || !(q.Low < q.High) || q.Declared || seen[q.Name] {
			t.Errorf("ill formed: %+v", q)
		}
		seen[q.Name] = true
		if _, err := Convert(q.Unit, q.Unit); err != nil {
			t.Errorf("%s: %v", q.Name, err)
		}
		// A unit in the name is the unit of the value.
		suffix := q.Name[strings.LastIndex(q.Name, "_")+1:]
		if unit := strings.ToLower(strings.ReplaceAll(q.Unit, "µ", "u")); unit != "" && unit != "a.u." && suffix != unit {
			t.Errorf("%s carries %q, its unit is %q", q.Name, suffix, q.Unit)
		}
	}
	Builtin()[0].Name = "changed"
	if _, ok := Lookup("changed"); ok || Builtin()[0].Name == "changed" {
		t.Error("the registry can be changed from outside")
	}
}

func TestConvert(t *testing.T) {
	t.Parallel()
	const tolerance = 1e-15 // relative; one rounding
	for _, c := range []struct {
		from, to string
		want     float64
		decimal  bool
	}{
		{"mV", "V", 1e-3, true}, {"V", "mV", 1e3, true}, {"µA", "uA", 1, true}, {"\u03bcA", "A", 1e-6, true}, {"nA", "µA", 1e-3, true},
		{"A", "µA", 1e6, true}, {"pA", "ua", 1e-6, true}, {"um", "nm", 1e3, true}, {"Å", "nm", 0.1, true}, {"angstrom", "nm", 0.1, true},
		{"inch", "mm", 25.4, false}, {"mil", "µm", 25.4, false}, {"mil", "inch", 1e-3, true}, {"%", "", 1e-2, true}, {"", "percent", 1e2, true},
		{"W", "mW", 1e3, true}, {"cd", "mcd", 1e3, true}, {"mlm", "lm", 1e-3, true}, {"s", "ms", 1e3, true}, {"a.u.", "A.U.", 1, true},
		{"furlong", "furlong", 1, true},
	} {
		got, err := Convert(c.from, c.to)
		if err != nil {
			t.Errorf("%s → %s: %v", c.from, c.to, err)
			continue
		}
		if f := got.Multiple * math.Pow10(got.Power); math.Abs(f-c.want) > tolerance*c.want || (got.Multiple == 1) != c.decimal {
			t.Errorf("%s → %s: %g × 10^%d, want %g", c.from, c.to, got.Multiple, got.Power, c.want)
		}
	}
}

func TestConvertRefuses(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ from, to, says string }{
		{"mA", "V", "mv"}, {"nm", "V", "uv"}, {"furlong", "nm", "unknown unit"}, {"V", "furlong", "no known conversions"}, {"", "nm", "unit \"\""}, {"counts", "nm", "arbitrary"},
	} {
		if _, err := Convert(c.from, c.to); !errors.Is(err, analytics.ErrInvalid) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s → %s: %v", c.from, c.to, err)
		}
	}
}

func TestDeclare(t *testing.T) {
	t.Parallel()
	q, err := Declare("leak_na", "", "nA", 0.01)
	if err != nil || q.Label != "leak_na" || !q.Declared || !(q.Low < q.High) {
		t.Errorf("%+v %v", q, err)
	}
	for _, c := range []struct {
		name       string
		resolution float64
		want       error
	}{
		{"Leak", 1, analytics.ErrInvalid}, {"", 1, analytics.ErrInvalid}, {"1a", 1, analytics.ErrInvalid}, {strings.Repeat("a", 64), 1, analytics.ErrInvalid},
		{"leak", 0, analytics.ErrInvalid}, {"leak", math.NaN(), analytics.ErrInvalid}, {"leak", math.Inf(1), analytics.ErrInvalid}, {"cie_x", 1, analytics.ErrConflict},
	} {
		if _, err := Declare(c.name, "", "", c.resolution); !errors.Is(err, c.want) {
			t.Errorf("%q at %g: %v, want %v", c.name, c.resolution, err, c.want)
		}
	}
}

func TestSort(t *testing.T) {
	t.Parallel()
	var qs []Quantity
	for _, name := range []string{"zeta", "forward_voltage_v", "alpha", "peak_wavelength_nm"} {
		qs = append(qs, Quantity{Name: name})
	}
	Sort(qs)
	var names []string
	for _, q := range qs {
		names = append(names, q.Name)
	}
	if got := strings.Join(names, " "); got != "peak_wavelength_nm forward_voltage_v alpha zeta" {
		t.Errorf("order: %s", got)
	}
}
