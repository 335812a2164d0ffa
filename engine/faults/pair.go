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
	sounding    = -50.0 // dBFS rms: below that a second says nothing about polarity or balance
)

// How far apart the levels of left and right may be. Players sit to one side and duets are spread wide, so
// a difference must last; but one sound in both channels, only weaker in one, was meant to sit in the
// middle. Common practice, no source.
const (
	apart      = 10.0 // dB, worth a note
	wideApart  = 20.0 // dB, no place on a stage explains it
	alikeApart = 2.0  // dB, of one sound in both channels: worth a note
	apartIn    = 0.9  // of the sounding seconds must differ by the limit, to the same side
)

var leanings = [2]float64{apart, wideApart}

// pair compares the left and right channel by ρ = ΣLR / √(ΣL²·ΣR²): 1 is one sound in both, −1 one
// sound turned over in one of them. What remains of one channel once the other has been taken out of
// it as well as can be is 1 − ρ² of its power.
type pair struct {
	left, right int // channels, −1 if there is no such pair
	rate        int64
	whole, part correlation // of the recording and of the second under way
	negative    int         // seconds with ρ < 0 of those in which both channels sound
	both        int         // those seconds
	either      int         // seconds in which at least one channel sounds
	leaning     [2][2]int   // of them those that lean by apart and by wideApart, to the left and to the right
}

// correlation is the three sums ρ is made of.
type correlation struct{ ll, rr, lr float64 }

func newPair(f audio.Format) *pair {
	p := &pair{rate: int64(f.Rate)}
	p.left, p.right = leftRight(f.Layout)
	return p
}

// leftRight returns the left and right channel, −1 for one there is not.
func leftRight(l audio.Layout) (left, right int) {
	if l.Channels == 2 {
		return 0, 1
	}
	left, right = -1, -1
	for c := range l.Channels {
		switch l.Position(c) {
		case audio.FrontLeft:
			left = c
		case audio.FrontRight:
			right = c
		}
	}
	return left, right
}

// exists reports whether there are a left and a right channel.
func (p *pair) exists() bool { return p.left >= 0 && p.right >= 0 }

func (p *pair) look(w window) {
	if !p.exists() {
		return
	}
	p.part.add(w.Block[p.left], w.Block[p.right])
	if end := w.from + int64(w.Frames()); end/p.rate > w.from/p.rate {
		p.endSecond()
	}
}

// add adds samples to the sums, in two lanes, which do not wait for each other.
//
//go:norace
func (s *correlation) add(left, right []float32) {
	right = right[:len(left)]
	var a, b correlation
	for len(left) >= 2 && len(right) >= 2 {
		l, r := float64(left[0]), float64(right[0])
		a.ll += l * l
		a.rr += r * r
		a.lr += l * r
		l, r = float64(left[1]), float64(right[1])
		b.ll += l * l
		b.rr += r * r
		b.lr += l * r
		left, right = left[2:], right[2:]
	}
	if len(left) == 1 {
		l, r := float64(left[0]), float64(right[0])
		b.ll += l * l
		b.rr += r * r
		b.lr += l * r
	}
	*s = correlation{s.ll + (a.ll + b.ll), s.rr + (a.rr + b.rr), s.lr + (a.lr + b.lr)}
}

// rho returns the correlation coefficient, NaN if a channel is silent.
func (s correlation) rho() float64 { return s.lr / math.Sqrt(s.ll*s.rr) }

// ratio returns the level of right over left in dB.
func (s correlation) ratio() float64 { return 10 * math.Log10(s.rr/s.ll) }

func (p *pair) endSecond() {
	s := p.part
	p.part = correlation{}
	p.whole = correlation{p.whole.ll + s.ll, p.whole.rr + s.rr, p.whole.lr + s.lr}
	heard := float64(p.rate) * math.Pow(10, sounding/10)
	if min(s.ll, s.rr) >= heard {
		p.both++
		if s.lr < 0 {
			p.negative++
		}
	}
	if max(s.ll, s.rr) >= heard {
		p.either++
		for i, limit := range leanings {
			switch r := s.ratio(); {
			case r <= -limit:
				p.leaning[i][0]++
			case r >= limit:
				p.leaning[i][1]++
			}
		}
	}
}

func (p *pair) faults(e extent) (found []Fault) {
	if !p.exists() {
		return nil
	}
	p.endSecond() // the last, which may be short
	quiet, loud := p.left, p.right
	if p.whole.rr < p.whole.ll {
		quiet, loud = p.right, p.left
	}
	if float64(e.peak[loud]) <= audio.DB(silence).Linear() {
		return nil
	}
	rho, ratio := p.whole.rho(), math.Abs(p.whole.ratio())
	if ratio >= -lost && float64(e.peak[quiet]) <= audio.DB(lostPeak).Linear() {
		return []Fault{{Code: "channel-missing", Severity: Doubt, Length: e.Seconds(e.frames), Words: fmt.Sprintf(
			"%s is missing: only %s carries sound", channelName(e.Layout, quiet), channelName(e.Layout, loud))}}
	}
	same := rho > 0 && 1-rho*rho <= math.Pow(10, alike/10)
	switch {
	case same:
		found = append(found, Fault{Code: "dual-mono", Severity: Note, Length: e.Seconds(e.frames),
			Words: "the left and right channels carry the same sound: it is mono in two channels"})
	case rho <= oppositeAll && p.both > 0 && float64(p.negative) >= oppositeIn*float64(p.both):
		found = append(found, Fault{Code: "polarity", Severity: Doubt, Length: e.Seconds(e.frames), Words: fmt.Sprintf(
			"one channel seems to be upside down (correlation %s): heard in mono, much of it cancels out", audio.Number(rho, 2))})
	}
	f := Fault{Code: "unbalanced", Length: e.Seconds(e.frames), Words: fmt.Sprintf(
		"%s is %.0f dB weaker than %s", channelName(e.Layout, quiet), ratio, channelName(e.Layout, loud))}
	switch {
	case same && ratio >= apart || ratio >= wideApart && p.lasts(1):
		f.Severity = Doubt
	case same && ratio >= alikeApart || ratio >= apart && p.lasts(0):
		f.Severity = Note
	default:
		return found
	}
	return append(found, f)
}

// lasts reports whether nearly all sounding seconds lean to the same side by a limit of leanings.
func (p *pair) lasts(i int) bool {
	n := max(p.leaning[i][0], p.leaning[i][1])
	return n > 0 && float64(n) >= apartIn*float64(p.either)
}

func (p *pair) measure(_ extent, c *Condition) {
	if rho := p.whole.rho(); p.exists() && audio.Defined(rho) {
		c.Correlation = audio.Ratio(max(-1, min(1, rho)))
		c.Balance = audio.DB(p.whole.ratio())
	}
}
