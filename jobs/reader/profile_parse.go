package reader

import (
	"path"
	"slices"
	"strings"
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
