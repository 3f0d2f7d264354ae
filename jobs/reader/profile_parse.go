package reader

import (
	"path"
	"slices"
	"strings"

	"epitally/analytics/yamldoc"
)

// Limits of a profile.
const (
	maxListed = 500
	maxHead   = 1000 // lines above the header row
)

// ParseProfile reads a reading profile. Every error is an *analytics.Fault with
// line and key.
func ParseProfile(doc []byte) (Profile, error) {
	root, err := parseDocument(doc)
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
	read func(*Profile, yamldoc.Node) error
}{
	{"format", (*Profile).readFormat},
	{"match", (*Profile).readMatch},
	{"file_name", (*Profile).readFileName},
	{"delimiter", (*Profile).readDelimiter},
	{"decimal", (*Profile).readDecimal},
	{"encoding", (*Profile).readEncoding},
	{"header", (*Profile).readHeader},
	{"skip", func(p *Profile, n yamldoc.Node) (err error) { p.skip, err = n.Whole(0, maxHead); return err }},
	{"stop", func(p *Profile, n yamldoc.Node) (err error) { p.stop, err = n.Text(); return err }},
	{"comment", func(p *Profile, n yamldoc.Node) (err error) { p.comment, err = n.Text(); return err }},
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

func (p *Profile) parse(root yamldoc.Node) error {
	keys := []string{"profile!"}
	for _, part := range profileParts {
		switch part.key {
		case "format", "match":
			keys = append(keys, part.key+"!")
		default:
			keys = append(keys, part.key)
		}
	}
	f, err := root.Fields(keys...)
	if err != nil {
		return err
	}
	if p.Name, err = nameIn(f["profile"]); err != nil {
		return err
	}
	for _, part := range profileParts {
		if n := f[part.key]; n.Is() {
			if err := part.read(p, n); err != nil {
				return err
			}
		}
		if n := f[part.key]; n.Is() && p.format == formatSTDF && slices.Contains(delimitedOnly, part.key) {
			return n.Fault("remove it", "%q is for delimited text only", part.key)
		}
	}
	return p.check(root, f)
}

// check holds the parts against each other.
func (p *Profile) check(root yamldoc.Node, f map[string]yamldoc.Node) error {
	if p.format == formatSTDF {
		return nil
	}
	for _, key := range []string{"header", "columns", "quantities"} {
		if !f[key].Is() {
			return root.Fault("", "the key %q is missing", key)
		}
	}
	if p.delimiter == p.point && !p.spread {
		return either(f["delimiter"], root).Fault("choose another delimiter or decimal", "the delimiter is the decimal point as well")
	}
	if p.header.none {
		if p.columns.x.number == 0 || p.columns.y.number == 0 || p.columns.wafer.name != "" {
			return f["columns"].Fault("give the numbers of the columns, from 1", "without a header row, columns have no names")
		}
		for _, v := range p.values {
			if v.column.number == 0 {
				return f["quantities"].Fault("give the numbers of the columns, from 1", "without a header row, the column %q has no name", v.column.name)
			}
		}
	}
	for _, need := range []struct{ key, example string }{{"kind", "constants: {kind: probe}"}, {"measured_at", "facts: {measured_at: {label: STARTED}}"}, {"wafer", "facts: {wafer: {label: WAFER}}"}} {
		if !p.states(need.key) {
			return root.Fault("add for example "+need.example+", or a group (?P<"+need.key+">…) in file_name", "nothing says where %s is found", need.key)
		}
	}
	if p.states("measured_at") && len(p.layouts) == 0 {
		return root.Fault(`add for example time: {layouts: ["yyyy-MM-dd HH:mm"], zone: UTC}`, "nothing says how times are written")
	}
	return nil
}

func either(n, other yamldoc.Node) yamldoc.Node {
	if n.Is() {
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

func (p *Profile) readFormat(n yamldoc.Node) (err error) {
	p.format, err = n.Choice(formatDelimited, formatSTDF)
	return err
}

// readMatch reads a list of globs, or {regexp: PATTERN}.
func (p *Profile) readMatch(n yamldoc.Node) (err error) {
	if list, err := n.Entries(); err == nil {
		if len(list) != 1 || list[0].Name != "regexp" {
			return n.Fault("write a list of file-name globs, or {regexp: PATTERN}", "match is neither")
		}
		p.name, err = list[0].Value.Pattern()
		return err
	}
	if p.globs, err = n.Texts(maxListed); err != nil {
		return err
	}
	for _, g := range p.globs {
		if _, err := path.Match(g, ""); err != nil || strings.Contains(g, "/") {
			return n.Fault("use * and ? on the base name", "%q is not a file-name glob", g)
		}
	}
	return nil
}

func (p *Profile) readFileName(n yamldoc.Node) (err error) {
	p.fileName, err = n.Pattern()
	return err
}

func (p *Profile) readDelimiter(n yamldoc.Node) error {
	s, err := n.Scalar()
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
		return n.Fault(`use one character such as ";", or tab, or spaces (any number of them)`, "%q is not a delimiter", s)
	}
	return nil
}

func (p *Profile) readDecimal(n yamldoc.Node) error {
	s, err := n.Choice(".", ",")
	if err == nil {
		p.point = s[0]
	}
	return err
}

func (p *Profile) readEncoding(n yamldoc.Node) (err error) {
	p.encoding, err = n.Choice("utf-8", "latin-1", "utf-16")
	return err
}

func (p *Profile) readHeader(n yamldoc.Node) error {
	if s, err := n.Text(); err == nil {
		if s != "none" {
			return n.Fault("write {row: 7}, {with: [X, Y]} or none", "%q does not say where the header row is", s)
		}
		p.header.none = true
		return nil
	}
	f, err := n.Fields("row", "with")
	if err != nil {
		return err
	}
	if f["row"].Is() == f["with"].Is() {
		return n.Fault("", "give either row or with")
	}
	if f["row"].Is() {
		p.header.row, err = f["row"].Whole(1, maxHead)
		return err
	}
	p.header.with, err = f["with"].Texts(maxListed)
	return err
}

// readRef reads a column by name (text) or number.
func readRef(n yamldoc.Node) (r columnRef, err error) {
	if r.number, err = n.Whole(1, maxColumns); err == nil {
		return r, nil
	}
	r.name, err = n.Text()
	return r, err
}

func (p *Profile) readColumns(n yamldoc.Node) error {
	f, err := n.Fields("x!", "y!", "wafer")
	if err != nil {
		return err
	}
	for _, c := range []struct {
		key string
		to  *columnRef
	}{{"x", &p.columns.x}, {"y", &p.columns.y}, {"wafer", &p.columns.wafer}} {
		if f[c.key].Is() {
			if *c.to, err = readRef(f[c.key]); err != nil {
				return err
			}
		}
	}
	return nil
}

func (p *Profile) readMissing(n yamldoc.Node) (err error) {
	p.missing, err = n.Texts(maxListed)
	return err
}

func (p *Profile) readCoordinates(n yamldoc.Node) error {
	f, err := n.Fields("swap", "negate", "offset")
	if err != nil {
		return err
	}
	if f["swap"].Is() {
		if p.place.swap, err = f["swap"].Truth(); err != nil {
			return err
		}
	}
	if f["negate"].Is() {
		axes, err := f["negate"].Texts(2)
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
				return f["negate"].Fault("use x, y or [x, y]", "%q is not an axis", a)
			}
		}
	}
	if !f["offset"].Is() {
		return nil
	}
	list, err := f["offset"].Items(2)
	if err != nil {
		return err
	}
	if len(list) != 2 {
		return f["offset"].Fault("write [x, y]", "the offset is not a pair")
	}
	if p.place.offsetX, err = list[0].Whole(-1<<15, 1<<15); err != nil {
		return err
	}
	p.place.offsetY, err = list[1].Whole(-1<<15, 1<<15)
	return err
}

func (p *Profile) readDuplicates(n yamldoc.Node) error {
	s, err := n.Choice("refuse", "first", "last")
	p.policy, p.policySet = policies[s], true
	return err
}
