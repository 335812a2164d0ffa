package speech

import "math"

const (
	lowestPitch  = 80.0 // Hz
	perOctave    = 24
	pitchCount   = 57 // up to 403 Hz
	partials     = 7
	voicedEnough = 110 // of 255: from there on a frame has a pitch
)

// pitches looks for the pitch of a frame: the one whose partials stand out most from what is half way between them
// (after the sum of subharmonics: D. Hermes, J. Acoust. Soc. Am. 83, 257–264, 1988).
type pitches struct {
	on, between [pitchCount][partials]int // bins of the partials and of what is below each
}

func newPitches(binWidth float64, bins int) *pitches {
	var p pitches
	for i := range p.on {
		hz := lowestPitch * math.Exp2(float64(i)/perOctave)
		for h := range partials {
			p.on[i][h] = min(bins-1, int(math.Round(hz*float64(h+1)/binWidth)))
			p.between[i][h] = min(bins-1, int(math.Round(hz*(float64(h)+0.5)/binWidth)))
		}
	}
	return &p
}

// best returns the likeliest pitch and how far its partials stand out.
//
//go:norace
func (p *pitches) best(magnitudes []float64) (pitch, voiced uint8) {
	best := -1.0
	for i := range p.on {
		var on, between float64
		for h, k := range &p.on[i] {
			on += magnitudes[k]
			between += magnitudes[p.between[i][h]]
		}
		if clear := (on - between) / (on + between + 1e-300); clear > best {
			best, pitch = clear, uint8(i)
		}
	}
	return pitch, small(255 * best)
}
