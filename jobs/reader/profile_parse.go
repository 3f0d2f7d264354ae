package reader

import (
	"fmt"
	"path"
	"slices"
	"strings"
	"time"

	"epitally/analytics"
	"epitally/analytics/quantity"
)

// Limits of a profile.
const (
	maxListed = 500
	maxHead   = 1000 // lines above the header row
)

// ParseProfile reads a reading profile. Every error is an *analytics.Fault with
// line and key.
func ParseProfile(doc []byte) (Profile, error) {
	root, err := parseYAML(doc)
	if err != nil {
		return Profile{}, err
	}
	p := &Profile{delimiter: ',', point: '.', encoding: "utf-8"}
	if err := p.parse(root); err != nil {
		return Profile{}, err
	}
	return *p, nil
}

// readers of the parts of a profile, in the order their faults are found.
var profileParts = []struct {
	key  string
	read func(*Profile, node) error
}{
	{"format", (*Profile).readFormat},
	{"match", (*Profile).readMatch},
	{"file_name", (*Profile).readFileName},
	{"delimiter", (*Profile).readDelimiter},
	{"decimal", (*Profile).readDecimal},
	{"encoding", (*Profile).readEncoding},
	{"header", (*Profile).readHeader},
	{"skip", func(p *Profile, n node) (err error) { p.skip, err = n.whole(0, maxHead); return err }},
	{"stop", func(p *Profile, n node) (err error) { p.stop, err = n.text(); return err }},
	{"comment", func(p *Profile, n node) (err error) { p.comment, err = n.text(); return err }},
	{"columns", (*Profile).readColumns},
	{"quantities", (*Profile).readQuantities},
	{"constants", (*Profile).readConstants},
	{"facts", (*Profile).readFacts},
	{"time", (*Profile).readTime},
	{"missing", (*Profile).readMissing},
	{"coordinates", (*Profile).readCoordinates},
	{"duplicates", (*Profile).readDuplicates},
}

// delimitedOnly are keys that mean nothing for STDF, which says these itself.
var delimitedOnly = []string{"delimiter", "decimal", "encoding", "header", "skip", "stop", "comment", "columns", "facts", "missing"}

func (p *Profile) parse(root node) error {
	keys := []string{"profile!"}
	for _, part := range profileParts {
		switch part.key {
		case "format", "match":
			keys = append(keys, part.key+"!")
		default:
			keys = append(keys, part.key)
		}
	}
	f, err := root.fields(keys...)
	if err != nil {
		return err
	}
	if p.Name, err = f["profile"].name(); err != nil {
		return err
	}
	for _, part := range profileParts {
		if n := f[part.key]; n.is() {
			if err := part.read(p, n); err != nil {
				return err
			}
		}
		if n := f[part.key]; n.is() && p.format == formatSTDF && slices.Contains(delimitedOnly, part.key) {
			return n.fault("remove it", "%q is for delimited text only", part.key)
		}
	}
	return p.check(root, f)
}

// check holds the parts against each other.
func (p *Profile) check(root node, f map[string]node) error {
	if p.format == formatSTDF {
		return nil
	}
	for _, key := range []string{"header", "columns", "quantities"} {
		if !f[key].is() {
			return root.fault("", "the key %q is missing", key)
		}
	}
	if p.delimiter == p.point && !p.spread {
		return f["delimiter"].orElse(root).fault("choose another delimiter or decimal", "the delimiter is the decimal point as well")
	}
	if p.header.none {
		if p.columns.x.number == 0 || p.columns.y.number == 0 || p.columns.wafer.name != "" {
			return f["columns"].fault("give the numbers of the columns, from 1", "without a header row, columns have no names")
		}
		for _, v := range p.values {
			if v.column.number == 0 {
				return f["quantities"].fault("give the numbers of the columns, from 1", "without a header row, the column %q has no name", v.column.name)
			}
		}
	}
	for _, need := range []struct{ key, example string }{{"kind", "constants: {kind: probe}"}, {"measured_at", "facts: {measured_at: {label: STARTED}}"}, {"wafer", "facts: {wafer: {label: WAFER}}"}} {
		if !p.states(need.key) {
			return root.fault("add for example "+need.example+", or a group (?P<"+need.key+">…) in file_name", "nothing says where %s is found", need.key)
		}
	}
	if p.states("measured_at") && len(p.layouts) == 0 {
		return root.fault(`add for example time: {layouts: ["yyyy-MM-dd HH:mm"], zone: UTC}`, "nothing says how times are written")
	}
	return nil
}

func (n node) orElse(other node) node {
	if n.is() {
		return n
	}
	return other
}

// states reports whether the profile says where a fact is found.
func (p *Profile) states(key string) bool {
	if key == "wafer" && p.columns.wafer.given() {
		return true
	}
	if _, ok := p.constants[key]; ok {
		return true
	}
	if p.fileName != nil && p.fileName.SubexpIndex(key) >= 0 {
		return true
	}
	return slices.ContainsFunc(p.facts, func(f factRule) bool { return f.key == key })
}

func (p *Profile) readFormat(n node) (err error) {
	p.format, err = n.choice(formatDelimited, formatSTDF)
	return err
}

// readMatch reads a list of globs, or {regexp: PATTERN}.
func (p *Profile) readMatch(n node) (err error) {
	if list, err := n.entries(); err == nil {
		if len(list) != 1 || list[0].name != "regexp" {
			return n.fault("write a list of file-name globs, or {regexp: PATTERN}", "match is neither")
		}
		p.name, err = list[0].value.pattern()
		return err
	}
	if p.globs, err = n.texts(maxListed); err != nil {
		return err
	}
	for _, g := range p.globs {
		if _, err := path.Match(g, ""); err != nil || strings.Contains(g, "/") {
			return n.fault("use * and ? on the base name", "%q is not a file-name glob", g)
		}
	}
	return nil
}

func (p *Profile) readFileName(n node) (err error) {
	p.fileName, err = n.pattern()
	return err
}

func (p *Profile) readDelimiter(n node) error {
	s, err := n.scalar()
	switch {
	case err != nil:
		return err
	case s == "tab" || s == "\t":
		p.delimiter = '\t'
	case s == "spaces":
		p.delimiter, p.spread = ' ', true
	case len(s) == 1 && s[0] < 0x80 && !strings.ContainsAny(s, "\"\n\r+-0123456789"):
		p.delimiter = s[0]
	default:
		return n.fault(`use one character such as ";", or tab, or spaces (any number of them)`, "%q is not a delimiter", s)
	}
	return nil
}

func (p *Profile) readDecimal(n node) error {
	s, err := n.choice(".", ",")
	if err == nil {
		p.point = s[0]
	}
	return err
}

func (p *Profile) readEncoding(n node) (err error) {
	p.encoding, err = n.choice("utf-8", "latin-1", "utf-16")
	return err
}

func (p *Profile) readHeader(n node) error {
	if s, err := n.text(); err == nil {
		if s != "none" {
			return n.fault("write {row: 7}, {with: [X, Y]} or none", "%q does not say where the header row is", s)
		}
		p.header.none = true
		return nil
	}
	f, err := n.fields("row", "with")
	if err != nil {
		return err
	}
	if f["row"].is() == f["with"].is() {
		return n.fault("", "give either row or with")
	}
	if f["row"].is() {
		p.header.row, err = f["row"].whole(1, maxHead)
		return err
	}
	p.header.with, err = f["with"].texts(maxListed)
	return err
}

// readRef reads a column by name (text) or number.
func readRef(n node) (r columnRef, err error) {
	if r.number, err = n.whole(1, maxColumns); err == nil {
		return r, nil
	}
	r.name, err = n.text()
	return r, err
}

func (p *Profile) readColumns(n node) error {
	f, err := n.fields("x!", "y!", "wafer")
	if err != nil {
		return err
	}
	for _, c := range []struct {
		key string
		to  *columnRef
	}{{"x", &p.columns.x}, {"y", &p.columns.y}, {"wafer", &p.columns.wafer}} {
		if f[c.key].is() {
			if *c.to, err = readRef(f[c.key]); err != nil {
				return err
			}
		}
	}
	return nil
}

func (p *Profile) readQuantities(n node) error {
	items, err := n.items(maxListed)
	if err != nil {
		return err
	}
	if len(items) == 0 {
		return n.fault("", "the list is empty")
	}
	for _, item := range items {
		v, err := p.readValue(item)
		if err != nil {
			return err
		}
		for _, have := range p.values {
			if have.quantity.Name == v.quantity.Name {
				return item.fault("", "the quantity %s stands twice", v.quantity.Name)
			}
		}
		p.values = append(p.values, v)
	}
	return nil
}

func (p *Profile) readValue(n node) (v valueRule, err error) {
	from := []string{"column!"}
	if p.format == formatSTDF {
		from = []string{"test", "test_name"}
	}
	f, err := n.fields(append([]string{"quantity!", "unit", "label", "resolution", "store_unit"}, from...)...)
	if err != nil {
		return v, err
	}
	v.line, _ = position(n.GetToken())
	v.test = -1
	if p.format == formatSTDF {
		err = v.readTest(n, f)
	} else {
		v.column, err = readRef(f["column"])
	}
	if err != nil {
		return v, err
	}
	if f["unit"].is() {
		if v.unit, err = f["unit"].scalar(); err != nil {
			return v, err
		}
		v.unit, v.unitSet = strings.TrimSpace(v.unit), true
	}
	if v.quantity, err = readQuantity(f, v.unit); err != nil {
		return v, err
	}
	v.convert = quantity.Conversion{Multiple: 1}
	switch {
	case v.unitSet:
		if v.convert, err = quantity.Convert(v.unit, v.quantity.Unit); err != nil {
			return v, f["unit"].wrap(err)
		}
	case p.format == formatDelimited && v.quantity.Unit != "":
		return v, n.fault("add the unit that the file writes, for example unit: "+v.quantity.Unit, "the unit of the column is not stated")
	}
	return v, nil
}

func (v *valueRule) readTest(n node, f map[string]node) error {
	if !f["test"].is() && !f["test_name"].is() {
		return n.fault("add test: NUMBER or test_name: TEXT", "nothing says which test gives the quantity")
	}
	if f["test"].is() {
		number, err := f["test"].whole(0, 1<<32-1)
		if err != nil {
			return err
		}
		v.test = int64(number)
	}
	if f["test_name"].is() {
		name, err := f["test_name"].text()
		v.testName = name
		return err
	}
	return nil
}

// readQuantity gives the built-in quantity of that name, else declares it.
func readQuantity(f map[string]node, unit string) (quantity.Quantity, error) {
	name, err := f["quantity"].text()
	if err != nil {
		return quantity.Quantity{}, err
	}
	if q, ok := quantity.Lookup(name); ok {
		for _, key := range []string{"label", "resolution", "store_unit"} {
			if f[key].is() {
				return q, f[key].fault("remove it", "%s is built in and has its own %s", name, key)
			}
		}
		return q, nil
	}
	if !f["resolution"].is() {
		return quantity.Quantity{}, f["quantity"].fault("correct the name, or declare it with unit, label and resolution", "the quantity %q is not built in", name)
	}
	resolution, err := f["resolution"].number()
	if err != nil {
		return quantity.Quantity{}, err
	}
	label := ""
	if f["label"].is() {
		if label, err = f["label"].text(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	if f["store_unit"].is() {
		if unit, err = f["store_unit"].scalar(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	q, err := declareQuantity(name, label, unit, resolution)
	if err != nil {
		return q, f["quantity"].wrap(err)
	}
	return q, nil
}

func (p *Profile) readConstants(n node) error {
	list, err := n.entries()
	if err != nil {
		return err
	}
	p.constants = map[string]string{}
	for _, e := range list {
		text, err := e.value.text()
		if err != nil {
			return err
		}
		if e.name == "measured_at" {
			return e.value.fault("remove it, and say in facts or file_name where the file states it", "the time of measurement is no constant")
		}
		if err := (&about{}).state(factKey(e.name), text); err != nil {
			return e.value.wrap(err)
		}
		p.constants[e.name] = text
	}
	return nil
}

// factKey turns a profile's fact name into the key of `# key: value` lines.
func factKey(name string) string {
	switch name {
	case "measured_at", "drive_current", "edge_exclusion", "x_axis", "y_axis":
		return strings.ReplaceAll(name, "_", " ")
	}
	return name
}

func (p *Profile) readFacts(n node) error {
	list, err := n.entries()
	if err != nil {
		return err
	}
	for _, e := range list {
		f, err := e.value.fields("label", "line", "field", "unit")
		if err != nil {
			return err
		}
		rule := factRule{key: e.name, field: 1}
		if f["label"].is() == f["line"].is() {
			return e.value.fault("write {label: TEXT}, or {line: 3, field: 2}", "give either a label or a line")
		}
		if f["label"].is() {
			rule.label, err = f["label"].text()
		} else {
			rule.line, err = f["line"].whole(1, maxHead)
		}
		if err == nil && f["field"].is() {
			rule.field, err = f["field"].whole(1, maxColumns)
		}
		if err == nil && f["unit"].is() {
			rule.unit, err = f["unit"].text()
		}
		if err != nil {
			return err
		}
		p.facts = append(p.facts, rule)
	}
	return nil
}

func (p *Profile) readTime(n node) error {
	f, err := n.fields("layouts", "zone")
	if err != nil {
		return err
	}
	if f["layouts"].is() {
		texts, err := f["layouts"].texts(maxListed)
		if err != nil {
			return err
		}
		for _, text := range texts {
			layout, err := timeLayout(text)
			if err != nil {
				return f["layouts"].wrap(err)
			}
			p.layouts = append(p.layouts, layout)
		}
	}
	if f["zone"].is() {
		name, err := f["zone"].text()
		if err != nil {
			return err
		}
		if p.zone, err = time.LoadLocation(name); err != nil || name == "Local" {
			return f["zone"].fault("use UTC or a name like Europe/Berlin", "the time zone %q is not known", name)
		}
	}
	return nil
}

// timeTokens are the parts of a time layout, longest first.
var timeTokens = []struct{ token, layout string }{
	{"yyyy", "2006"}, {"MMM", "Jan"}, {"SSS", "000"}, {"yy", "06"}, {"MM", "01"}, {"dd", "02"}, {"HH", "15"}, {"hh", "03"},
	{"mm", "04"}, {"ss", "05"}, {"tt", "PM"}, {"zz", "Z07:00"},
}

// timeLayout turns yyyy-MM-dd HH:mm:ss into a layout of package time.
func timeLayout(text string) (string, error) {
	var b strings.Builder
	for at := 0; at < len(text); {
		found := false
		for _, t := range timeTokens {
			if strings.HasPrefix(text[at:], t.token) {
				b.WriteString(t.layout)
				at += len(t.token)
				found = true
				break
			}
		}
		if found {
			continue
		}
		c := text[at]
		if c >= '0' && c <= '9' || c != 'T' && (c|0x20 >= 'a' && c|0x20 <= 'z') {
			return "", &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%q is not a time layout", text),
				Remedy: "use yyyy, yy, MM, MMM, dd, HH, hh, mm, ss, SSS, tt (AM or PM) and zz (zone), for example yyyy-MM-dd HH:mm:ss"}
		}
		b.WriteByte(c)
		at++
	}
	return b.String(), nil
}

func (p *Profile) readMissing(n node) (err error) {
	p.missing, err = n.texts(maxListed)
	return err
}

func (p *Profile) readCoordinates(n node) error {
	f, err := n.fields("swap", "negate", "offset")
	if err != nil {
		return err
	}
	if f["swap"].is() {
		if p.place.swap, err = f["swap"].truth(); err != nil {
			return err
		}
	}
	if f["negate"].is() {
		axes, err := f["negate"].texts(2)
		if err != nil {
			return err
		}
		for _, a := range axes {
			switch a {
			case "x":
				p.place.negateX = true
			case "y":
				p.place.negateY = true
			default:
				return f["negate"].fault("use x, y or [x, y]", "%q is not an axis", a)
			}
		}
	}
	if !f["offset"].is() {
		return nil
	}
	list, err := f["offset"].items(2)
	if err != nil {
		return err
	}
	if len(list) != 2 {
		return f["offset"].fault("write [x, y]", "the offset is not a pair")
	}
	if p.place.offsetX, err = list[0].whole(-1<<15, 1<<15); err != nil {
		return err
	}
	p.place.offsetY, err = list[1].whole(-1<<15, 1<<15)
	return err
}

func (p *Profile) readDuplicates(n node) error {
	s, err := n.choice("refuse", "first", "last")
	p.policy, p.policySet = policies[s], true
	return err
}
