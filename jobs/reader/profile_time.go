package reader

import (
	"fmt"
	"strings"
	"time"

	"epitally/analytics"
	"epitally/analytics/yamldoc"
)

func (p *Profile) readConstants(n yamldoc.Node) error {
	list, err := n.Entries()
	if err != nil {
		return err
	}
	p.constants = map[string]string{}
	for _, e := range list {
		text, err := e.Value.Text()
		if err != nil {
			return err
		}
		if e.Name == "measured_at" {
			return e.Value.Fault("remove it, and say in facts or file_name where the file states it", "the time of measurement is no constant")
		}
		if err := (&about{}).state(factKey(e.Name), text); err != nil {
			return e.Value.Wrap(err)
		}
		p.constants[e.Name] = text
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

func (p *Profile) readFacts(n yamldoc.Node) error {
	list, err := n.Entries()
	if err != nil {
		return err
	}
	for _, e := range list {
		f, err := e.Value.Fields("label", "line", "field", "unit")
		if err != nil {
			return err
		}
		rule := factRule{key: e.Name, field: 1}
		if f["label"].Is() == f["line"].Is() {
			return e.Value.Fault("write {label: TEXT}, or {line: 3, field: 2}", "give either a label or a line")
		}
		if f["label"].Is() {
			rule.label, err = f["label"].Text()
		} else {
			rule.line, err = f["line"].Whole(1, maxHead)
		}
		if err == nil && f["field"].Is() {
			rule.field, err = f["field"].Whole(1, maxColumns)
		}
		if err == nil && f["unit"].Is() {
			rule.unit, err = f["unit"].Text()
		}
		if err != nil {
			return err
		}
		p.facts = append(p.facts, rule)
	}
	return nil
}

func (p *Profile) readTime(n yamldoc.Node) error {
	f, err := n.Fields("layouts", "zone")
	if err != nil {
		return err
	}
	if f["layouts"].Is() {
		texts, err := f["layouts"].Texts(maxListed)
		if err != nil {
			return err
		}
		for _, text := range texts {
			layout, err := timeLayout(text)
			if err != nil {
				return f["layouts"].Wrap(err)
			}
			p.layouts = append(p.layouts, layout)
		}
	}
	if f["zone"].Is() {
		name, err := f["zone"].Text()
		if err != nil {
			return err
		}
		if p.zone, err = time.LoadLocation(name); err != nil || name == "Local" {
			return f["zone"].Fault("use UTC or a name like Europe/Berlin", "the time zone %q is not known", name)
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
