package level

import (
	"evenshelf/engine/audio"
	"evenshelf/engine/speech"
)

// voices follows the speech in a recording. Films put it into the centre: where there is one it is heard
// alone first, and the mix of all channels is only asked if nobody speaks there.
type voices struct {
	all, centre *speech.Detector
	at          int // the centre's channel
	view        audio.Block
}

func newVoices(f audio.Format) *voices {
	v := &voices{all: speech.New(f), at: centreOf(f.Layout)}
	if v.at >= 0 {
		v.centre = speech.New(audio.Format{Rate: f.Rate, Layout: audio.Mono})
		v.view = make(audio.Block, 1)
	}
	return v
}

// centreOf returns the channel of the centre loudspeaker among others, or −1.
func centreOf(l audio.Layout) int {
	for c := 0; l.Channels > 2 && c < l.Channels; c++ {
		if l.Position(c) == audio.FrontCentre {
			return c
		}
	}
	return -1
}

func (v *voices) write(b audio.Block) {
	v.all.Write(b)
	if v.centre != nil {
		v.view[0] = b[v.at]
		v.centre.Write(v.view)
	}
}

// finish returns where programme is heard in any channel, and the speech.
func (v *voices) finish() speech.Course {
	course := v.all.Finish()
	if v.centre == nil {
		return course
	}
	centre := v.centre.Finish()
	if !speechIn(centre).enough() {
		return course
	}
	for i, on := range centre.Active {
		course.Active[i] = course.Active[i] || on
	}
	course.Speech = centre.Speech
	return course
}

// fitted is a course with so many steps: the copy an encoder makes may be some frames longer or shorter.
func fitted(c speech.Course, steps int) speech.Course {
	f := speech.Course{Active: make([]bool, steps), Speech: make([]float32, steps)}
	copy(f.Active, c.Active)
	copy(f.Speech, c.Speech)
	return f
}
