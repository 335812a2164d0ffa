package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// An offset takes headroom, may make a cut click, and grows with the gain; K-weighting hides it from a loudness
// meter. Below the first limit it does no harm. Common practice, no source.
const (
	offsetNote  = 0.005 // of full scale, −46 dBFS
	offsetDoubt = 0.05  // −26 dBFS
	offsetShare = 0.9   // of the seconds must lean the same way: deep notes lean both ways
)

// offset finds channels whose waveform does not swing about zero (DC offset): the mean of all windows the channel
// sounds in is off, and that of nearly every second of them by at least half as much to the same side.
type offset struct {
	rate     int64
	channels []leaning
}

// leaning is the mean of one channel.
type leaning struct {
	total         float64   // sum of all samples
	whole, second heard     // of the recording, and of the second under way
	seconds       []float32 // means of those that sound for half of their length or more
}

// heard is the sum of the samples of the windows in which a channel is not silent, and their number.
type heard struct {
	sum    float64
	frames int64
}

func (h *heard) add(sum float64, frames int64) { *h = heard{h.sum + sum, h.frames + frames} }

func (h heard) mean() float64 { return h.sum / float64(h.frames) }

func newOffset(f audio.Format) *offset {
	o := &offset{int64(f.Rate), make([]leaning, f.Layout.Channels)}
	for c := range o.channels {
		o.channels[c].seconds = make([]float32, 0, 3600) // an hour before there must be more room
	}
	return o
}

func (o *offset) look(w window) {
	frames, level := int64(w.Frames()), audio.DB(silence).Linear()
	for c, s := range w.sums {
		l := &o.channels[c]
		l.total += s
		if float64(w.peak[c]) > level {
			l.whole.add(s, frames)
			l.second.add(s, frames)
		}
		if end := w.from + frames; end/o.rate > w.from/o.rate { // windows are tenths of a second, so seconds end with one or nearly
			if l.second.frames >= max(1, o.rate/2) {
				l.seconds = append(l.seconds, float32(l.second.mean()))
			}
			l.second = heard{}
		}
	}
}

func (o *offset) faults(e extent) (found []Fault) {
	for c, l := range o.channels {
		if len(l.seconds) == 0 {
			continue
		}
		mean := l.whole.mean()
		if math.Abs(mean) < offsetNote {
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
			Words: fmt.Sprintf("%s lies %.1f %% of full scale %s the middle (DC offset): a cut in it may click",
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
