package reader

import (
	"fmt"
	"path"
	"regexp"
	"strings"
	"time"

	"epitally/analytics"
	"epitally/analytics/quantity"
)

const (
	formatDelimited = "delimited"
	formatSTDF      = "stdf"
)

// Profile is a parsed reading profile: how a file that is not Epitally's own
// becomes measurements. The package comment documents its keys.
type Profile struct {
	Name string

	format   string
	globs    []string
	name     *regexp.Regexp // match as a regular expression, when given so
	fileName *regexp.Regexp // named groups give facts; nil = none

	delimiter byte
	spread    bool
	point     byte
	encoding  string
	header    headerRule
	skip      int    // lines between the header row and the first row
	stop      string // a line that begins so ends the rows
	comment   string // lines that begin so are passed over
	columns   columnRules
	values    []valueRule
	constants map[string]string
	facts     []factRule
	layouts   []string // Go time layouts, in the order tried
	zone      *time.Location
	missing   []string
	place     placement
	policy    policy
	policySet bool
}

// headerRule says where the header row of a delimited file is.
type headerRule struct {
	row  int      // 1-based line; 0 = not by number
	with []string // the first line that holds all of these names; nil = not by names
	none bool     // there is none: columns are numbers
}

// columnRef names a column by its header or its 1-based number.
type columnRef struct {
	name   string
	number int
}

type columnRules struct{ x, y, wafer columnRef }

func (r columnRef) given() bool { return r.name != "" || r.number > 0 }

// valueRule maps a column or a test to a quantity.
type valueRule struct {
	column   columnRef
	test     int64 // STDF test number; −1 = by name only
	testName string
	unit     string // the file's; "" with unitSet false = as the file states (STDF)
	unitSet  bool
	quantity quantity.Quantity
	convert  quantity.Conversion
	line     int // of the profile, for faults met while reading
}

// factRule says where a fact stands above the header row.
type factRule struct {
	key         string
	label       string // field before it; "" = by place
	line, field int
	unit        string // of a drive current whose cell is a bare number
}

// placement turns a file's coordinates into ours: swap, then signs, then offset.
type placement struct {
	swap             bool
	negateX, negateY bool
	offsetX, offsetY int
}

// apply places dies in place. A coordinate that leaves 16 bits is a Fault at its
// line (line may be nil).
func (p *placement) apply(x, y []int16, line []int32) error {
	if *p == (placement{}) {
		return nil
	}
	for i := range x {
		px, py := int(x[i]), int(y[i])
		if p.swap {
			px, py = py, px
		}
		if p.negateX {
			px = -px
		}
		if p.negateY {
			py = -py
		}
		px, py = px+p.offsetX, py+p.offsetY
		if px != int(int16(px)) || py != int(int16(py)) {
			f := &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("die (%d, %d) becomes (%d, %d), beyond 16-bit coordinates", x[i], y[i], px, py),
				Remedy: "check coordinates in the reading profile"}
			if line != nil {
				f.Line = int(line[i])
			}
			return f
		}
		x[i], y[i] = int16(px), int16(py)
	}
	return nil
}

// matches reports whether the profile's match fits a file name (base name).
// What compression adds to the name is passed over.
func (p *Profile) matches(name string) bool {
	base := path.Base(strings.ReplaceAll(name, `\`, "/"))
	for _, ending := range []string{".gz", ".zst", ".bz2"} {
		base = strings.TrimSuffix(base, ending)
	}
	if p.name != nil {
		return p.name.MatchString(base)
	}
	for _, g := range p.globs {
		if ok, _ := path.Match(g, base); ok {
			return true
		}
	}
	return false
}
