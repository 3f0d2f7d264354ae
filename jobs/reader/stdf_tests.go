package reader

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"epitally/analytics"
	"epitally/analytics/quantity"
)

// maxTests bounds the tests of a file that become quantities.
const maxTests = 4096

// stdfTests knows the parametric tests of a file, by number and text: some test
// programs give all pins of a test one number.
type stdfTests struct {
	profile  *Profile
	list     []stdfTest
	byNumber map[uint32]*stdfNumber
	seen     int             // tests, wanted or not
	names    map[string]bool // quantities already named
	shared   map[string]bool // quantities of the profile that another test fits, too
}

// stdfNumber is the tests of one number: their index in list, −1 = not wanted.
type stdfNumber struct {
	text  string // of the first test, as the file has it; "" = none stated yet
	test  int    // the first
	other map[string]int
}

// stdfTest is a test that becomes a quantity.
type stdfTest struct {
	quantity quantity.Quantity
	convert  quantity.Conversion
}

// find gives the index of a test in list, −1 when it is not wanted. The first
// PTR of a test carries in rest, from OPT_FLAG on, what the later ones leave out.
func (ts *stdfTests) find(number uint32, text []byte, rest *fields) (int, error) {
	known := ts.byNumber[number]
	if known != nil {
		if len(text) == 0 || string(text) == known.text || len(text) == 1 && text[0] == 0 {
			return known.test, nil
		}
		if test, ok := known.other[string(text)]; ok {
			return test, nil
		}
		if known.text == "" { // stated by a later record than the first
			known.text = string(text)
			return known.test, nil
		}
	}
	test := -1
	quantity, err := ts.wanted(number, printable(latin1(text)), stdfDefaultsOf(rest))
	if err != nil {
		return 0, err
	}
	if quantity != nil {
		if test = len(ts.list); test >= maxTests {
			return 0, &analytics.Fault{Offset: -1, Kind: analytics.ErrTooLarge, Problem: fmt.Sprintf("over %d parametric tests", maxTests),
				Remedy: "name the tests you need in a reading profile"}
		}
		ts.list = append(ts.list, *quantity)
	}
	if ts.seen++; ts.seen > 16*maxTests {
		return 0, &analytics.Fault{Offset: -1, Kind: analytics.ErrTooLarge, Problem: "too many parametric tests with different texts", Remedy: "check the test program's TEST_TXT"}
	}
	switch {
	case known == nil:
		ts.byNumber[number] = &stdfNumber{text: strings.Trim(string(text), "\x00"), test: test}
	case known.other == nil:
		known.other = map[string]int{string(text): test}
	default:
		known.other[string(text)] = test
	}
	return test, nil
}

// stdfDefaults is what the first PTR of a test says of it.
type stdfDefaults struct {
	scale    int8 // RES_SCAL: shown value = result · 10^scale
	units    string
	format   string // C_RESFMT, like %9.3f
	low, top float32
}

func stdfDefaultsOf(f *fields) (d stdfDefaults) {
	flag := f.u1(0xff)
	if scale := int8(f.u1(0)); flag&1 == 0 {
		d.scale = scale
	}
	f.take(2) // LLM_SCAL, HLM_SCAL
	d.low, d.top = f.r4(), f.r4()
	d.units = f.note()
	d.format = f.note()
	return d
}

// wanted says which quantity a test gives: the profile's, or with no profile
// one named from number, text and unit.
func (ts *stdfTests) wanted(number uint32, text string, d stdfDefaults) (*stdfTest, error) {
	if ts.profile == nil || len(ts.profile.values) == 0 {
		q, err := ts.name(number, text, d)
		return &stdfTest{q, quantity.Conversion{Multiple: 1}}, err
	}
	for i := range ts.profile.values {
		v := &ts.profile.values[i]
		if v.test >= 0 && v.test != int64(number) || v.testName != "" && v.testName != text {
			continue
		}
		if ts.names[v.quantity.Name] {
			if ts.shared == nil {
				ts.shared = map[string]bool{}
			}
			ts.shared[v.quantity.Name] = true
			continue
		}
		ts.names[v.quantity.Name] = true
		if v.unitSet {
			return &stdfTest{v.quantity, v.convert}, nil
		}
		c, err := quantity.Convert(d.units, v.quantity.Unit)
		if err != nil {
			return nil, &analytics.Fault{Offset: -1, Key: v.quantity.Name, Problem: fmt.Sprintf("test %d: %s", number, withoutKind(err)),
				Remedy: fmt.Sprintf("state the unit of the test in reading profile %s", ts.profile.Name)}
		}
		return &stdfTest{v.quantity, c}, nil
	}
	return nil, nil
}

// unmet lists the profile's quantities that no test of the file gave.
func (ts *stdfTests) unmet() (names []string) {
	if ts.profile == nil {
		return nil
	}
	for _, v := range ts.profile.values {
		if !ts.names[v.quantity.Name] {
			names = append(names, v.quantity.Name)
		}
	}
	return names
}

// name declares t<number>_<text>_<unit>.
func (ts *stdfTests) name(number uint32, text string, d stdfDefaults) (quantity.Quantity, error) {
	const (
		longest     = 63 - 6 // leaves room for a suffix that makes it the only one
		longestUnit = 32
	)
	stem := "t" + strconv.FormatUint(uint64(number), 10)
	unit := snake(d.units)
	if unit != "" {
		unit = "_" + unit[:min(len(unit), 12)]
	}
	if body := snake(text); body != "" {
		stem += "_" + body
	}
	stem = strings.TrimRight(stem[:min(len(stem), longest-len(unit))], "_") + unit
	name := stem
	for k := 2; ts.names[name]; k++ {
		name = fmt.Sprintf("%s_%d", stem, k)
	}
	ts.names[name] = true
	const longestText = maxName - len(" (test 4294967295)")
	label := fmt.Sprintf("%s (test %d)", strings.ToValidUTF8(text[:min(len(text), longestText)], ""), number)
	if text == "" {
		label = fmt.Sprintf("Test %d", number)
	}
	q, err := quantity.Declare(name, label, strings.ToValidUTF8(d.units[:min(len(d.units), longestUnit)], ""), d.resolution())
	if err != nil {
		return q, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("test %d: %s", number, withoutKind(err))}
	}
	return q, nil
}

// snake writes text with the letters, digits and underscores of a name.
func snake(text string) string {
	var b strings.Builder
	for _, c := range []byte(strings.ToLower(text)) {
		if c >= 'a' && c <= 'z' || c >= '0' && c <= '9' {
			b.WriteByte(c)
		} else if b.Len() > 0 && !strings.HasSuffix(b.String(), "_") {
			b.WriteByte('_')
		}
	}
	return strings.TrimRight(b.String(), "_")
}

// resolution is how finely the test is shown: by its format and scale, else a
// thousandth of its limits' span, else 0.001.
func (d *stdfDefaults) resolution() float64 {
	_, decimals, found := strings.Cut(d.format, ".")
	if places, err := strconv.Atoi(strings.TrimRight(decimals, "efgEFG")); found && err == nil && places >= 0 && places <= 15 {
		if exp := -places - int(d.scale); exp >= -15 && exp <= 9 {
			return math.Pow10(exp)
		}
	}
	if span := float64(d.top) - float64(d.low); span > 1e-12 && span < 1e12 {
		return math.Pow10(int(math.Floor(math.Log10(span))) - 3)
	}
	return 0.001
}
