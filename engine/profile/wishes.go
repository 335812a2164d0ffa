package profile

import "fmt"

// Wishes are what one run asks for beside its profile. The zero value asks for nothing.
type Wishes struct {
	Format  Format // "" is the profile's, as below
	BitRate int    // of a lossy format, kbit/s; 0
	Group   Group  // ""
}

// With returns the profile as a run has it that asks for something else, or what is wrong with that, as Validate does.
// It keeps its name and has a version of its own.
func (p Profile) With(w Wishes) (Profile, error) {
	if w.Format != "" {
		p.Delivered.Format = w.Format
	}
	if w.BitRate != 0 {
		p.Delivered.BitRate = w.BitRate
	}
	if w.Group != "" {
		p.Group = w.Group
	}
	err := p.Validate()
	if err == nil && w.BitRate != 0 && (p.Delivered.Format == WAV || p.Delivered.Format == FLAC) {
		err = Complaints{{Field: "delivered.bit_rate_kbps", Words: fmt.Sprintf("means nothing in %s, which has no bit rate to choose", p.Delivered.Format)}}
	}
	return p, err
}

// ForTags returns what a run that writes gain tags takes from a profile: how a single channel counts and which
// recordings belong together. The references of the tags are those of the open specifications, so nothing else matters; and
// what moves within a recording goes, which would not go with a group.
func (p Profile) ForTags() Profile {
	p.Anchor, p.Ride, p.Compressor = Programme, usual.Ride, usual.Compressor
	return p
}
