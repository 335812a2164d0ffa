package profile

import (
	"fmt"
	"regexp"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Complaint is one thing wrong with a profile.
type Complaint struct {
	File  string `json:"file,omitempty"` // where it comes from; "" if it is no file
	Line  int    `json:"line,omitempty"` // in the file; 0 if it does not come from one line
	Field string `json:"field"`          // with its table: "ride.lift_db"; "" if it is all of it
	Words string `json:"words"`
}

// Error names file, field and reason: "mine.toml: ride.lift_db: 99 is not between 0 and 40 (line 7)".
func (c Complaint) Error() string {
	if c.File == "" {
		return c.Place()
	}
	return c.File + ": " + c.Place()
}

// Place is the complaint without the file's name.
func (c Complaint) Place() string {
	s := c.Words
	if c.Field != "" {
		s = c.Field + ": " + s
	}
	if c.Line > 0 {
		s += fmt.Sprintf(" (line %d)", c.Line)
	}
	return s
}

// Complaints are all that is wrong with a profile, or with a folder of them. As an error they are a line each.
type Complaints []Complaint

func (c Complaints) Error() string {
	lines := make([]string, len(c))
	for i, one := range c {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

// orNil keeps an empty list from being an error.
func (c Complaints) orNil() error {
	if len(c) == 0 {
		return nil
	}
	return c
}

// about says whether there is a complaint about a field already.
func (c Complaints) about(field string) bool {
	for _, one := range c {
		if one.Field == field {
			return true
		}
	}
	return false
}

var validName = regexp.MustCompile(`^[a-z0-9][a-z0-9-]{0,39}$`)

// longestSummary is the most characters of a summary.
const longestSummary = 300

func wrongSummary(s string) string {
	switch {
	case strings.TrimSpace(s) == "":
		return "is empty: it has to be a sentence for a person who has to choose"
	case !utf8.ValidString(s) || strings.ContainsFunc(s, func(r rune) bool { return !unicode.IsPrint(r) || unicode.Is(unicode.Bidi_Control, r) }):
		return "has to be one line, without invisible characters"
	case utf8.RuneCountInString(s) > longestSummary:
		return fmt.Sprintf("is longer than %d characters", longestSummary)
	}
	return ""
}

// Validate returns every complaint about the profile, as Complaints; nil if there is none.
func (p Profile) Validate() error {
	var all Complaints
	for _, f := range fields {
		if words := f.wrong(&p); words != "" {
			all = append(all, Complaint{Field: f.Name, Words: words})
		}
	}
	for _, r := range p.rules() {
		// What is out of bounds by itself needs no second complaint.
		if r.broken && !all.about(r.field) && !all.about(r.with) {
			all = append(all, Complaint{Field: r.field, Words: r.words})
		}
	}
	return all.orNil()
}

// rule is what one field asks of another.
type rule struct {
	broken             bool
	field, with, words string
}

func (p Profile) rules() []rule {
	rides, together := p.Ride.Speed != Still, p.Group != Alone
	return []rule{
		{!(float64(p.Ceiling) > float64(p.Target)), "ceiling_dbtp", "target_lufs", fmt.Sprintf("%g is not above the target of %g LUFS", p.Ceiling, p.Target)},
		{together && p.Anchor != Programme, "anchor", "group", fmt.Sprintf("%s does not go with the group %s, whose recordings are brought to the target as one programme", p.Anchor, p.Group)},
		{together && rides, "ride.speed", "group", fmt.Sprintf("%s does not go with the group %s, whose recordings share one gain: it has to be none", p.Ride.Speed, p.Group)},
		{together && p.Compressor.Ratio != 1, "compressor.ratio", "group", fmt.Sprintf("%g does not go with the group %s, whose recordings share one gain: it has to be 1", p.Compressor.Ratio, p.Group)},
		{rides && p.Ride.Lift == 0 && p.Ride.Cut == 0, "ride.speed", "ride.lift_db", fmt.Sprintf("%s is a ride, but lift_db and cut_db are both 0 and leave it nothing to do", p.Ride.Speed)},
		{rides && 2*float64(p.Ride.Deadband) > float64(p.Ride.Range), "ride.deadband_db", "ride.range_lu",
			fmt.Sprintf("%g leaves up to %g LU as they are, more than the range_lu of %g", p.Ride.Deadband, 2*p.Ride.Deadband, p.Ride.Range)},
		{p.Harm.Over3 > p.Harm.Over1, "harm.limited_3db", "harm.limited_1db", fmt.Sprintf("%g is more than the limited_1db of %g, which is reached before it", p.Harm.Over3, p.Harm.Over1)},
		{p.Harm.Over6 > p.Harm.Over3, "harm.limited_6db", "harm.limited_3db", fmt.Sprintf("%g is more than the limited_3db of %g, which is reached before it", p.Harm.Over6, p.Harm.Over3)},
	}
}
