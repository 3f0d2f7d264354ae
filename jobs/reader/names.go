package reader

import (
	"fmt"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"epitally/analytics"
	"epitally/analytics/quantity"
)

// maxName is the longest wafer, lot or station name, in characters.
const maxName = 128

// checkName holds the name of a wafer, lot or station to what pages, addresses
// and file names can show.
func checkName(what, name string) error {
	problem := ""
	switch {
	case name == "":
		problem = "is empty"
	case !utf8.ValidString(name):
		problem = "is not UTF-8 text"
	case utf8.RuneCountInString(name) > maxName:
		problem = fmt.Sprintf("is over %d characters", maxName)
	case strings.ContainsFunc(name, func(r rune) bool { return !unicode.IsPrint(r) }):
		problem = "holds a character that does not print"
	case strings.ContainsAny(name, `/\`) || name == "." || name == "..":
		problem = "holds a slash or is only dots"
	case strings.TrimSpace(name) != name:
		problem = "begins or ends with a space"
	default:
		return nil
	}
	return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the %s name %s %s", what, shown([]byte(name)), problem),
		Remedy: fmt.Sprintf("a %s name is 1 to %d printable characters without / and \\", what, maxName)}
}

func checkKind(kind string) error {
	if quantity.ValidName(kind) {
		return nil
	}
	return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the measurement kind %s is not a name", shown([]byte(kind))),
		Remedy: "use pl, probe or another name of lower-case letters, digits and underscores, a letter first"}
}

// Moments outside these years are mistakes of a clock or a layout.
const (
	firstYear = 1980
	lastYear  = 2199
)

func checkYear(t time.Time, text string) error {
	if y := t.UTC().Year(); y < firstYear || y > lastYear {
		return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the time %q is in the year %d", text, y),
			Remedy: fmt.Sprintf("check the station's clock; years from %d to %d are read", firstYear, lastYear)}
	}
	return nil
}

var zonedLayouts = []string{"2006-01-02T15:04:05Z07:00", "2006-01-02T15:04Z07:00", "2006-01-02T15:04:05Z0700", "2006-01-02T15:04Z0700"}

// parseMoment reads an ISO 8601 time with its zone; a space may stand for the T.
func parseMoment(text string) (time.Time, error) {
	iso := strings.Replace(text, " ", "T", 1)
	iso = strings.ReplaceAll(iso, " ", "")
	for _, layout := range zonedLayouts {
		if t, err := time.Parse(layout, iso); err == nil {
			return t, checkYear(t, text)
		}
		if _, err := time.Parse(strings.TrimRight(layout, "Z07:"), iso); err == nil {
			return time.Time{}, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the time %q has no zone", text),
				Remedy: "add the zone: 2026-11-05T06:00:00Z or 2026-11-05T07:00:00+01:00"}
		}
	}
	return time.Time{}, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not a time", shown([]byte(text))),
		Remedy: "write it as 2026-11-05T06:00:00Z or 2026-11-05T07:00:00+01:00"}
}
