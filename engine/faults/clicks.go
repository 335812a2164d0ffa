package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// A click is one or a few samples that the sound around them does not explain: a bad splice, a lost sample,
// a scratch. What tells it from a drum, a consonant or a clap is that it is over at once: those rise as
// fast but ring on, and in a voice or a buzzing instrument every period has such a spike.
//
// So the second difference, which hardly sees deep sound, is watched in stretches of 0.7 ms. A stretch is
// suspected if it sticks out from every other one within 25 ms, and looked at closely by linear prediction.
// Common practice, no source.
const (
	stretch    = 0.0007 // seconds
	suspicious = 2.5    // times the largest second difference beside it
	leastClick = 1e-3   // of full scale
	clickRate  = 4000   // Hz: below, a sample is no shorter than other sound
)

// What linear prediction leaves unexplained of a click must be much larger than anything it leaves beside it,
// and the click no small part of the sound: the attack of a soft drum under a melody is as short. If it is
// larger by far, it need only be audible. Tried on nine hours of games' music and speech. Many clicks that
// rise out of the waveform set the peaks that levelling has to keep, and need a person.
const (
	unexplained, tall     = 15.0, 0.5  // times the largest error beside it, of the largest sample beside it
	inexplicable, audible = 40.0, 0.02 // the same
	tallLeast             = 0.02       // of full scale
	manyClicks            = 10
	oftenClicks           = 20.0 // a minute
)

// clicks finds them. What lies within 25 ms of the recording's ends has no surroundings and is passed over.
type clicks struct {
	size        int         // frames of a window
	stretches   int         // in a window
	hole        int         // frames of the shortest hole that is a dropout
	beside      int         // stretches looked at on each side
	rough       [][]float32 // largest second difference of each channel in those of the last window and this one
	predictor   *predictor
	count, loud int64
	first, last int64 // frames
}

func newClicks(f audio.Format) check {
	if f.Rate < clickRate {
		return nothing{}
	}
	k := &clicks{size: f.Rate / 10, predictor: newPredictor(f.Rate), hole: shortest(f.Rate)}
	k.stretches = int(float64(k.size) / (stretch * float64(f.Rate)))
	k.beside = k.stretches / 4
	k.rough = make([][]float32, f.Layout.Channels)
	for c := range k.rough {
		k.rough[c] = make([]float32, 2*k.stretches)
	}
	return k
}

//go:norace
func (k *clicks) look(w window) {
	start := w.wide.Frames() - w.Frames() // of the window in wide
	for c, x := range w.wide {
		r := k.rough[c]
		copy(r, r[k.stretches:])
		for i := range k.stretches {
			from, to := start+i*k.size/k.stretches, start+(i+1)*k.size/k.stretches
			r[k.stretches+i] = roughness(x[min(from, len(x))-2 : min(to, len(x))])
		}
	}
	for i := k.stretches - k.beside; i < 2*k.stretches-k.beside; i++ {
		for c, r := range k.rough {
			if k.sticksOut(r, i) {
				from := start + i*k.size/k.stretches - k.size
				k.examine(w, c, from-1, min(from+k.size/k.stretches+2, w.wide.Frames()-1))
			}
		}
	}
}

// roughness returns the largest second difference in x. Only every other one is looked at: those of a single
// stray sample are 1, −2 and 1 times its height, so that one of two neighbours is enough to see it.
//
//go:norace
func roughness(x []float32) float32 {
	var r, r2 uint32
	for ; len(x) >= 5; x = x[4:] { // in two lanes, which do not wait for each other
		r = max(r, math.Float32bits(x[0]-2*x[1]+x[2])<<1)
		r2 = max(r2, math.Float32bits(x[2]-2*x[3]+x[4])<<1)
	}
	if len(x) >= 3 {
		r = max(r, math.Float32bits(x[0]-2*x[1]+x[2])<<1)
	}
	return math.Float32frombits(max(r, r2) >> 1)
}

// sticksOut reports whether stretch i is far rougher than all beside it but its neighbours, which the click
// may reach into.
//
//go:norace
func (k *clicks) sticksOut(r []float32, i int) bool {
	v := r[i]
	if v < leastClick || v < r[i-1] || v <= r[i+1] {
		return false
	}
	limit := v / suspicious
	for d := 2; d <= k.beside; d++ {
		if r[i-d] > limit || r[i+d] > limit {
			return false
		}
	}
	return true
}

// examine counts a click among the frames [from, to) of wide in channel c, if there is one.
func (k *clicks) examine(w window, c, from, to int) {
	x := w.wide[c]
	at, bend := from, 0.0
	for i := from; i < to; i++ {
		if d := math.Abs(float64(x[i-1] - 2*x[i] + x[i+1])); d > bend {
			at, bend = i, d
		}
	}
	frame := w.from + int64(at-w.wide.Frames()+w.Frames())
	switch reach := k.predictor.side; {
	case frame < int64(k.size/4), at < reach, at+reach >= len(x): // it has no surroundings
		return
	case w.mended, k.atHole(x, at): // it is told of already
		return
	case k.count > 0 && frame-k.last < int64(k.size/20): // the same one in another channel
		return
	}
	ratio, height, sound := k.predictor.stray(x, at)
	switch {
	case ratio >= inexplicable && height >= max(leastClick, audible*sound):
	case ratio >= unexplained && height >= max(tallLeast, tall*sound):
	default:
		return
	}
	if k.count == 0 {
		k.first = frame
	}
	k.last = frame
	k.count++
	if height >= sound {
		k.loud++
	}
}

// atHole reports whether a hole, which may be a dropout, begins or ends at sample at of x. A click amid digital
// silence has silence on both sides.
func (k *clicks) atHole(x []float32, at int) bool {
	reach := k.predictor.moment + k.hole
	return (zeros(x[at-reach:at+1]) >= k.hole) != (zeros(x[at:at+reach+1]) >= k.hole)
}

// zeros returns the length of the longest run of exact zeros in x.
func zeros(x []float32) (longest int) {
	run := 0
	for _, v := range x {
		if run++; v != 0 {
			run = 0
		}
		longest = max(longest, run)
	}
	return longest
}

func (k *clicks) faults(e extent) []Fault {
	if k.count == 0 {
		return nil
	}
	at := e.Seconds(k.first)
	f := Fault{Code: "clicks", Severity: Note, At: at, Length: e.Seconds(k.count),
		Words: fmt.Sprintf("it clicks %s, first at %s", times(k.count), audio.Clock(at))}
	if k.loud >= manyClicks && float64(k.loud) >= oftenClicks*e.Seconds(e.frames)/60 {
		f.Severity = Doubt
		f.Words += fmt.Sprintf(", %s of them louder than the sound around", audio.Count(k.loud))
	}
	return []Fault{f}
}
