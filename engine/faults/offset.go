package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// An offset takes headroom, makes every cut click, and grows with the gain; K-weighting hides it from a
// loudness meter. Below the first limit it does no harm. Common practice, no source.
const (
	offsetNote  = 0.005 // of full scale, −46 dBFS
	offsetDoubt = 0.05  // −26 dBFS
	offsetShare = 0.9   // of the seconds must lean the same way: deep notes lean both ways
)

// offset finds channels whose waveform does not swing about zero (DC offset): the mean of the whole
// recording is off, and that of nearly every second by at least half as much to the same side.
type offset struct {
	rate     int64
	channels []leaning
}

// leaning is the mean of one channel.
type leaning struct {
	total, second float64
	seconds       []float32 // means
}

func newOffset(f audio.Format) *offset {
	o := &offset{int64(f.Rate), make([]leaning, f.Layout.Channels)}
	for c := range o.channels {
		o.channels[c].seconds = make([]float32, 0, 3600) // an hour before there must be more room
	}
	return o
}

func (o *offset) look(w window) {
	for c, s := range w.sums {
		l := &o.channels[c]
		l.total += s
		l.second += s
		end := w.from + int64(w.Frames())
		if end/o.rate > w.from/o.rate { // windows are tenths of a second, so seconds end with one or nearly
			l.seconds = append(l.seconds, float32(l.second/float64(o.rate)))
			l.second = 0
		}
	}
}

func (o *offset) faults(e extent) (found []Fault) {
	for c, l := range o.channels {
		mean := l.total / float64(e.frames)
		if e.frames == 0 || len(l.seconds) == 0 || math.Abs(mean) < offsetNote {
			continue
		}
		same := 0
		for _, s := range l.seconds {
			if float64(s)/mean >= 0.5 {
				same++
			}
		}
		if float64(same) < offsetShare*float64(len(l.seconds)) {
			continue
		}
		severity, side := Note, "above"
		if math.Abs(mean) >= offsetDoubt {
			severity = Doubt
		}
		if mean < 0 {
			side = "below"
		}
		found = append(found, Fault{
			Code: "dc-offset", Severity: severity, Length: e.Seconds(e.frames),
			Words: fmt.Sprintf("%s lies %.1f%% of full scale %s the middle (DC offset): cuts will click",
				channelName(e.Layout, c), 100*math.Abs(mean), side),
		})
	}
	return found
}

func (o *offset) measure(e extent, c *Condition) {
	mean := 0.0
	for _, l := range o.channels {
		if m := l.total / float64(e.frames); math.Abs(m) > math.Abs(mean) {
			mean = m
		}
	}
	c.Offset = audio.Ratio(mean)
}
