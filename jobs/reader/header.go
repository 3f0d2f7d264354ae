package reader

import (
	"fmt"
	"maps"
	"math"
	"strconv"
	"strings"
	"time"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// policy says what becomes of a die that stands in a source more than once.
type policy uint8

const (
	refuseDuplicates policy = iota
	firstWins
	lastWins
)

var policies = map[string]policy{"refuse": refuseDuplicates, "first": firstWins, "last": lastWins}

// about is what a source states of a measurement besides its dies.
type about struct {
	wafer, lot, kind, station string
	measuredAt                time.Time
	driveCurrentMA            *float64
	layout                    *wafermap.Layout
	facts                     map[string]string
	duplicates                policy
	declared                  map[string]quantity.Quantity
	waferHere                 bool // the wafer is stated in this block, not taken over
}

// inherit is what a later block of the same file starts from.
func (a about) inherit() about {
	a.facts, a.declared = maps.Clone(a.facts), maps.Clone(a.declared)
	a.waferHere = false
	if a.layout != nil {
		l := *a.layout
		a.layout = &l
	}
	return a
}

// Limits of what is shown and not computed with.
const (
	maxFacts    = 200
	maxFactText = 2000
)

// state takes one `# key: value`. Faults have no place: the caller knows it.
func (a *about) state(key, value string) (err error) {
	switch strings.ToLower(key) {
	case "wafer":
		a.wafer, a.waferHere, err = value, true, checkName("wafer", value)
	case "lot":
		a.lot, err = value, checkName("lot", value)
	case "kind":
		a.kind, err = value, checkKind(value)
	case "station":
		a.station, err = value, checkName("station", value)
	case "measured at":
		a.measuredAt, err = parseMoment(value)
	case "drive current":
		var v float64
		v, err = parseLength(value, "mA", "20 mA")
		a.driveCurrentMA = &v
	case "duplicates":
		p, ok := policies[value]
		if !ok {
			err = &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not a way to treat duplicates", shown([]byte(value))), Remedy: "use refuse, first or last"}
		}
		a.duplicates = p
	case "quantity":
		err = a.declare(value)
	case "pitch", "diameter", "edge exclusion", "flat", "notch", "x axis", "y axis", "centre":
		err = a.geometry(strings.ToLower(key), value)
	default:
		if len(a.facts) >= maxFacts || len(value) > maxFactText || len(key) > maxName {
			return &analytics.Fault{Offset: -1, Problem: "too many or too long facts", Remedy: fmt.Sprintf("state at most %d of %d bytes each", maxFacts, maxFactText)}
		}
		if a.facts == nil {
			a.facts = map[string]string{}
		}
		a.facts[key] = strings.ToValidUTF8(value, "\ufffd")
	}
	return err
}

// declare reads `name; label; unit; resolution`.
func (a *about) declare(value string) error {
	parts := strings.Split(value, ";")
	for i := range parts {
		parts[i] = strings.TrimSpace(parts[i])
	}
	fault := &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s does not declare a quantity", shown([]byte(value))),
		Remedy: "write `name; label; unit; resolution`, for example `leakage_na; Leakage; nA; 0.01`"}
	if len(parts) != 4 {
		return fault
	}
	resolution, err := strconv.ParseFloat(parts[3], 64)
	if err != nil || math.IsInf(resolution, 0) {
		return fault
	}
	q, err := declareQuantity(parts[0], parts[1], parts[2], resolution)
	if err != nil {
		fault.Problem, fault.Remedy = withoutKind(err), ""
		return fault
	}
	if a.declared == nil {
		a.declared = map[string]quantity.Quantity{}
	}
	a.declared[q.Name] = q
	return nil
}

// geometry reads what a source says of its wafer's layout.
func (a *about) geometry(key, value string) (err error) {
	if a.layout == nil {
		a.layout = &wafermap.Layout{Assumed: true}
	}
	l := a.layout
	switch key {
	case "pitch":
		l.DiePitchXMM, l.DiePitchYMM, err = parsePitch(value)
	case "diameter":
		l.WaferDiameterMM, err = parseLength(value, "mm", "100 mm")
	case "edge exclusion":
		l.EdgeExclusionMM, err = parseLength(value, "mm", "2 mm")
	case "flat", "notch":
		l.Mark = key
		l.MarkAngleDeg, err = parseDirection(value)
	case "x axis":
		l.XAxis, err = oneOf(value, "right", "left")
	case "y axis":
		l.YAxis, err = oneOf(value, "up", "down")
	case "centre":
		l.CentreX, l.CentreY, err = parsePair(value)
	}
	return err
}

func oneOf(value string, words ...string) (string, error) {
	for _, w := range words {
		if value == w {
			return w, nil
		}
	}
	return "", &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not known here", shown([]byte(value))), Remedy: "use " + strings.Join(words, " or ")}
}

// parseLength reads a positive number with its unit and converts it.
func parseLength(text, unit, example string) (float64, error) {
	fault := &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not a number with a unit", shown([]byte(text))), Remedy: "write it like " + example}
	number, from, found := strings.Cut(text, " ")
	if !found {
		at := strings.LastIndexAny(text, "0123456789.") + 1
		number, from = text[:at], text[at:]
	}
	v, err := strconv.ParseFloat(number, 64)
	if err != nil || !(v >= 0) || v > 1e9 || from == "" {
		return 0, fault
	}
	c, err := quantity.Convert(strings.TrimSpace(from), unit)
	if err != nil {
		fault.Problem = withoutKind(err)
		return 0, fault
	}
	return convertFloat(v, c), nil
}

// parsePitch reads `0.4 x 0.4 mm` or `0.4 mm`.
func parsePitch(text string) (x, y float64, err error) {
	first, second, both := strings.Cut(text, " x ")
	if !both {
		x, err = parseLength(text, "mm", "0.4 x 0.4 mm")
		return x, x, err
	}
	if y, err = parseLength(strings.TrimSpace(second), "mm", "0.4 x 0.4 mm"); err != nil {
		return 0, 0, err
	}
	_, unit, _ := strings.Cut(strings.TrimSpace(second), " ")
	x, err = parseLength(strings.TrimSpace(first)+" "+strings.TrimSpace(unit), "mm", "0.4 x 0.4 mm")
	return x, y, err
}

// parsePair reads `x, y`.
func parsePair(text string) (x, y float64, err error) {
	first, second, _ := strings.Cut(text, ",")
	x, errX := strconv.ParseFloat(strings.TrimSpace(first), 64)
	y, errY := strconv.ParseFloat(strings.TrimSpace(second), 64)
	if errX != nil || errY != nil || !(math.Abs(x) <= 1<<15) || !(math.Abs(y) <= 1<<15) {
		return 0, 0, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not a pair of die coordinates", shown([]byte(text))), Remedy: "write it like 0.5, 0"}
	}
	return x, y, nil
}

var directions = map[string]float64{"right": 0, "up": 90, "left": 180, "down": 270}

// parseDirection reads where a flat or notch points: a word or degrees
// counter-clockwise from the right.
func parseDirection(text string) (float64, error) {
	if v, ok := directions[text]; ok {
		return v, nil
	}
	number := strings.TrimSpace(strings.TrimSuffix(strings.TrimSuffix(text, "deg"), "°"))
	v, err := strconv.ParseFloat(number, 64)
	if err != nil || !(math.Abs(v) <= 360) {
		return 0, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not a direction", shown([]byte(text))),
			Remedy: "use right, up, left, down or degrees counter-clockwise from the right, like 270"}
	}
	return v, nil
}

// declareQuantity declares a quantity; declaring a built-in one again with its
// own unit is no fault and gives the built-in one.
func declareQuantity(name, label, unit string, resolution float64) (quantity.Quantity, error) {
	if len(label) > maxName || len(unit) > 32 {
		return quantity.Quantity{}, fmt.Errorf("the label or the unit of quantity %s is too long: %w", shown([]byte(name)), analytics.ErrInvalid)
	}
	if q, ok := quantity.Lookup(name); ok && q.Unit == unit {
		return q, nil
	}
	return quantity.Declare(name, label, unit, resolution)
}
