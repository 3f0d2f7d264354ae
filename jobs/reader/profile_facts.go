package reader

import (
	"fmt"
	"maps"
	"slices"
	"time"

	"epitally/analytics"
)

// moment gives the zone for times that state none, and says so when it had to
// be assumed.
func (j *job) moment(p *Profile) *time.Location {
	if p != nil && p.zone != nil {
		return p.zone
	}
	j.notice("times have no zone in this file: taken as %s", j.in.Zone)
	return j.in.Zone
}

// stateOutside states what the profile knows without the file's text: its
// constants, and the named groups of file_name in the file's name.
func (p *Profile) stateOutside(a *about, base string, zone func(*Profile) *time.Location) error {
	for _, key := range slices.Sorted(maps.Keys(p.constants)) {
		if err := p.state(a, key, p.constants[key], zone); err != nil {
			return columned(err, 0, key)
		}
	}
	if p.fileName == nil {
		return nil
	}
	groups := p.fileName.FindStringSubmatch(base)
	if groups == nil {
		return &analytics.Fault{Offset: -1, Key: "file_name", Problem: fmt.Sprintf("the file name %q does not fit %s", base, p.fileName),
			Remedy: "rename the file, or correct file_name in reading profile " + p.Name}
	}
	for i, key := range p.fileName.SubexpNames() {
		if key == "" || groups[i] == "" {
			continue
		}
		if err := p.state(a, key, groups[i], zone); err != nil {
			return columned(err, 0, key)
		}
	}
	return nil
}

// state takes one fact under its name in a profile.
func (p *Profile) state(a *about, key, text string, zone func(*Profile) *time.Location) (err error) {
	if key != "measured_at" {
		return a.state(factKey(key), text)
	}
	a.measuredAt, err = p.parseTime(text, zone)
	return err
}

// parseTime tries the profile's layouts in turn.
func (p *Profile) parseTime(text string, zone func(*Profile) *time.Location) (time.Time, error) {
	for _, layout := range p.layouts {
		t, err := time.Parse(layout, text)
		if err != nil {
			continue
		}
		if !hasZone(layout) {
			t, err = time.ParseInLocation(layout, text, zone(p))
		}
		if err == nil {
			err = checkYear(t, text)
		}
		return t, err
	}
	return time.Time{}, &analytics.Fault{Offset: -1, Key: "measured_at", Problem: fmt.Sprintf("the time %s fits no layout", shown([]byte(text))),
		Remedy: "correct time.layouts in reading profile " + p.Name}
}

func hasZone(layout string) bool {
	return len(layout) >= 6 && slices.Contains([]byte(layout), 'Z')
}
