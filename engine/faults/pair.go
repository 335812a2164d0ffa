package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

const (
	lost        = -50.0 // dB: a channel this far below its partner is missing
	lostPeak    = -60.0 // dBFS: and nothing in it is above this
	alike       = -60.0 // dB: what one channel has that the other has not, below the sound
	oppositeAll = -0.4  // correlation: the left and right of usual stereo have 0.3 to 0.7
	oppositeIn  = 0.8   // of the sounding seconds must be negative
	sounding    = -50.0 // dBFS rms: below that a second says nothing about polarity
)

// pair compares the left and right channel by ρ = ΣLR / √(ΣL²·ΣR²): 1 is one sound in both, −1 one
// sound turned over in one of them. What remains of one channel once the other has been taken out of
// it as well as can be is 1 − ρ² of its power.
type pair struct {
	left, right int // channels, −1 if there is no such pair
	rate        int64
	whole, part correlation // of the recording and of the second under way
	negative    int         // sounding seconds with ρ < 0
	seconds     int         // sounding seconds
}

// correlation is the three sums ρ is made of.
type correlation struct{ ll, rr, lr float64 }

func newPair(f audio.Format) *pair {
	p := &pair{left: -1, right: -1, rate: int64(f.Rate)}
	for c := range f.Layout.Channels {
		switch f.Layout.Position(c) {
		case audio.FrontLeft:
			p.left = c
		case audio.FrontRight:
			p.right = c
		}
	}
	if f.Layout.Channels == 2 {
		p.left, p.right = 0, 1
	}
	return p
}

func (p *pair) look(w window) {
	if p.left < 0 || p.right < 0 {
		return
	}
	p.part.add(w.Block[p.left], w.Block[p.right])
	if end := w.from + int64(w.Frames()); end/p.rate > w.from/p.rate {
		p.endSecond()
	}
}

// add adds samples to the sums.
//
//go:norace
func (s *correlation) add(left, right []float32) {
	right = right[:len(left)]
	var ll, rr, lr float64
	for i, l := range left {
		l, r := float64(l), float64(right[i])
		ll += l * l
		rr += r * r
		lr += l * r
	}
	s.ll, s.rr, s.lr = s.ll+ll, s.rr+rr, s.lr+lr
}

func (p *pair) endSecond() {
	s := p.part
	p.part = correlation{}
	p.whole = correlation{p.whole.ll + s.ll, p.whole.rr + s.rr, p.whole.lr + s.lr}
	if min(s.ll, s.rr) < float64(p.rate)*math.Pow(10, sounding/10) {
		return
	}
	p.seconds++
	if s.lr < 0 {
		p.negative++
	}
}

func (p *pair) faults(e extent) []Fault {
	if p.left < 0 || p.right < 0 || e.silent() {
		return nil
	}
	p.endSecond() // the last, which may be short
	f := Fault{Length: e.Seconds(e.frames)}
	s := p.whole
	quiet, loud := p.left, p.right
	if s.rr < s.ll {
		quiet, loud = p.right, p.left
	}
	rho := s.lr / math.Sqrt(s.ll*s.rr)
	switch {
	case min(s.ll, s.rr) <= max(s.ll, s.rr)*math.Pow(10, lost/10):
		if float64(e.peak[quiet]) > linear(lostPeak) {
			return nil
		}
		f.Code, f.Severity = "channel-missing", Doubt
		f.Words = fmt.Sprintf("%s is missing: only %s carries sound", channelName(e.Layout, quiet), channelName(e.Layout, loud))
	case 1-rho*rho <= math.Pow(10, alike/10) && rho > 0:
		f.Code, f.Severity = "dual-mono", Note
		f.Words = "the left and right channels carry the same sound: it is mono in two channels"
	case rho <= oppositeAll && p.seconds > 0 && float64(p.negative) >= oppositeIn*float64(p.seconds):
		f.Code, f.Severity = "polarity", Doubt
		f.Words = fmt.Sprintf("one channel seems to be upside down (correlation %.2f): heard in mono, much of it cancels out", rho)
	default:
		return nil
	}
	return []Fault{f}
}
