package ride

import "slices"

const (
	wideRange = 30.0 // dB from the softest to the loudest: more, and the anchor goes to the middle of what lift and cut reach
	fewest    = 0.02 // of the time, at either end, that do not count
)

// anchor returns the level that things are brought towards. In speech it is the median of phrases, since a few
// loud effects that were taken for speech would pull a mean; of a programme the loudness.
//
// What ranges very widely has it in the middle of what can be reached, so that neither lift nor cut runs out before the
// other, and where voices are brought together, it is where both suffice if there is such a place. The gain that
// follows a ride puts the anchor where it is wanted, so nothing is lost.
func (j *job) anchor(slow []float64) float64 {
	var voices, all []weighted
	long := slices.ContainsFunc(j.phrases, phrase.voiced)
	for _, p := range j.phrases {
		if long && !p.voiced() { // says nothing of how far apart voices are
			continue
		}
		said := 0
		for i := p.From; i < p.To; i++ {
			if j.spoken[i] {
				said++
			}
			all = append(all, weighted{slow[i], 1})
		}
		if 2*said >= p.To-p.From {
			voices = append(voices, weighted{p.level, p.long})
		}
	}
	anchor := j.loudness
	if j.Speech && len(voices) > 0 {
		all, anchor = voices, percentile(voices, 0.5)
	}
	low, high := percentile(all, fewest), percentile(all, 1-fewest)
	switch least, most := high-j.Cut, low+j.Lift; {
	case high-low > wideRange:
		return (least + most) / 2
	case j.Step > 0 && least <= most:
		return clamp(anchor, least, most)
	}
	return anchor
}
