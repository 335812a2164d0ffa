package id3

import (
	"regexp"
	"strings"
)

// dates gathers what 2.3 has for a date: a year, day and month "DDMM", hours and minutes "HHMM".
type dates struct{ year, day, time string }

func (d *dates) take(id, value string) {
	switch id {
	case "TYER":
		d.year = value
	case "TDAT":
		d.day = value
	case "TIME":
		d.time = value
	}
}

var four = regexp.MustCompile(`^[0-9]{4}$`)

// String is the date as 2.4 has it (2.4.0 structure, 4), or "".
func (d dates) String() string {
	s := d.year
	if four.MatchString(s) && four.MatchString(d.day) {
		s += "-" + d.day[2:] + "-" + d.day[:2]
		if four.MatchString(d.time) {
			s += "T" + d.time[:2] + ":" + d.time[2:]
		}
	}
	return s
}

// timestamp is what 2.4's frames of dates may say.
var timestamp = regexp.MustCompile(`^[0-9]{4}(-[0-9]{2}(-[0-9]{2}(T[0-9]{2}(:[0-9]{2}(:[0-9]{2})?)?)?)?)?$`)

// isDate are the frames that hold nothing but a timestamp.
var isDate = map[string]bool{"TDRC": true, "TDOR": true, "TDRL": true, "TDEN": true, "TDTG": true}

// stamped is a date of ISO 8601 as 2.4 has it: with a T in front of the time, which is in UTC and does not say so.
func stamped(s string) string {
	if t := strings.TrimSuffix(strings.Replace(s, " ", "T", 1), "Z"); timestamp.MatchString(t) {
		return t
	}
	return s
}
