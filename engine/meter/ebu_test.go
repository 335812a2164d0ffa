package meter

import (
	"fmt"
	"math"
	"strings"
	"sync"
	"testing"

	"evenshelf/engine/audio"
)

// The signals are those of EBU Tech 3341 v4 (2023), Table 1, and Tech 3342 v4, made here from their
// descriptions, at several rates and as files of several depths hold them. The standards allow ±0.1 LU,
// +0.2/−0.4 dB of true peak and ±1 LU of range; these tests hold the engine to what an ideal meter reads.
const tenth = 0.01 // LU or dB: a tenth of the standard's tolerance, or less

// ebuCase reads one signal and reports what it gives against what an ideal meter reads.
type ebuCase struct {
	name string
	over bool // beyond full scale, which only float holds
	read func(e *ebu)
}

// ebu is one run of one case: made at a rate, held at a depth.
type ebu struct {
	t     fataler
	rate  int
	depth depth
	worst float64 // deviation from the ideal so far, with its sign
}

// reads notes a reading and what it should be.
func (e *ebu) reads(got, ideal float64) {
	if d := got - ideal; !(math.Abs(d) <= math.Abs(e.worst)) { // NaN too
		e.worst = d
	}
}

func (e *ebu) tone(parts ...part) audio.Block {
	return e.depth.hold(tone(e.rate, 1000, 2, parts...))
}

func (e *ebu) measure(b audio.Block) (Reading, Timeline) {
	return measure(e.t, e.rate, audio.UsualLayout(len(b)), b)
}

var ebuCases = []ebuCase{
	integratedCase("3341-1", -22.993, part{20, -23}),
	integratedCase("3341-2", -32.993, part{20, -33}),
	integratedCase("3341-3", -23.014, part{10, -36}, part{60, -23}, part{10, -36}),
	integratedCase("3341-4", -23.014, part{10, -72}, part{10, -36}, part{60, -23}, part{10, -36}, part{10, -72}),
	integratedCase("3341-5", -22.979, part{20, -26}, part{20.1, -20}, part{20, -26}),
	{"3341-6", false, surround},
	{"3341-9", false, func(e *ebu) {
		_, line := e.measure(e.tone(repeat(5, part{1.34, -20}, part{1.66, -30})...))
		for _, s := range line.ShortTerm[shortTermSteps-1:] {
			e.reads(float64(s), -22.986)
		}
	}},
	{"3341-10", false, func(e *ebu) {
		for i := range 20 {
			r, _ := e.measure(e.tone(part{float64(i) * 0.15, silent}, part{3, -23}, part{1, silent}))
			e.reads(float64(r.MaxShortTerm), -22.993)
		}
	}},
	{"3341-11", false, func(e *ebu) {
		e.live(3, 0.15, func(m *Meter) float64 { return m.maxShort })
	}},
	{"3341-12", false, func(e *ebu) {
		_, line := e.measure(e.tone(repeat(25, part{0.18, -20}, part{0.22, -30})...))
		for _, m := range line.Momentary[9:] {
			e.reads(float64(m), -22.960)
		}
	}},
	{"3341-13", false, func(e *ebu) {
		for i := range 20 {
			r, _ := e.measure(e.tone(part{float64(i) * 0.02, silent}, part{0.4, -23}, part{1, silent}))
			e.reads(float64(r.MaxMomentary), -22.994)
		}
	}},
	{"3341-14", false, func(e *ebu) {
		e.live(0.4, 0.02, func(m *Meter) float64 { return m.maxMoment })
	}},
	peakCase("3341-15", 1.0/4, 0.5, 0),
	peakCase("3341-16", 1.0/4, 0.5, 45),
	peakCase("3341-17", 1.0/6, 0.5, 60),
	peakCase("3341-18", 1.0/8, 0.5, 67.5),
	peakCase("3341-19", 1.0/4, 1.41, 45),
	burstCase("3341-20", 0),
	burstCase("3341-21", 1),
	burstCase("3341-22", 2),
	burstCase("3341-23", 3),
	rangeCase("3342-1", 10, part{20, -20}, part{20, -30}),
	rangeCase("3342-2", 5, part{20, -20}, part{20, -15}),
	rangeCase("3342-3", 20, part{20, -40}, part{20, -20}),
	rangeCase("3342-4", 15, part{20, -50}, part{20, -35}, part{20, -20}, part{20, -35}, part{20, -50}),
}

func TestEBU(t *testing.T) {
	type row map[string]float64 // worst deviation by depth
	var mutex sync.Mutex
	table := make(map[string]row)
	for _, c := range ebuCases {
		table[c.name] = row{}
	}
	t.Run("all", func(t *testing.T) {
		for _, rate := range rates {
			for _, depth := range depths {
				t.Run(fmt.Sprintf("%d/%s", rate, depth), func(t *testing.T) {
					t.Parallel()
					for _, c := range ebuCases {
						if c.over && depth != 0 {
							continue
						}
						e := &ebu{t: t, rate: rate, depth: depth}
						c.read(e)
						if !(math.Abs(e.worst) <= tenth) {
							t.Errorf("%s is off by %+.4f", c.name, e.worst)
						}
						mutex.Lock()
						if w := table[c.name]; math.Abs(e.worst) >= math.Abs(w[depth.String()]) {
							w[depth.String()] = e.worst
						}
						mutex.Unlock()
					}
				})
			}
		}
	})
	var text strings.Builder
	for _, c := range ebuCases {
		fmt.Fprintf(&text, "\n%-8s", c.name)
		for _, d := range depths {
			if w, ok := table[c.name][d.String()]; ok {
				fmt.Fprintf(&text, "  %s %+.4f", d, w)
			}
		}
	}
	t.Logf("worst deviation from the ideal over %d Hz, by depth, in LU or dB%s", rates, text.String())
}

func integratedCase(name string, ideal float64, parts ...part) ebuCase {
	return ebuCase{name, false, func(e *ebu) {
		r, _ := e.measure(e.tone(parts...))
		e.reads(float64(r.Integrated), ideal)
		if len(parts) == 1 {
			e.reads(float64(r.MaxMomentary), ideal)
			e.reads(float64(r.MaxShortTerm), ideal)
		}
	}}
}

func rangeCase(name string, want float64, parts ...part) ebuCase {
	return ebuCase{name, false, func(e *ebu) {
		r, _ := e.measure(e.tone(parts...))
		e.reads(float64(r.Range), want)
	}}
}

// surround is case 6, as 5.0 and as 5.1 with a silent LFE.
func surround(e *ebu) {
	for _, layout := range []audio.Layout{front51, audio.UsualLayout(6)} {
		b := tone(e.rate, 1000, layout.Channels, part{20, 0})
		for c := range b {
			level := map[audio.Speaker]float64{
				audio.FrontLeft: -28, audio.FrontRight: -28, audio.FrontCentre: -24,
				audio.BackLeft: -30, audio.BackRight: -30, audio.LowFrequency: silent,
			}[layout.Position(c)]
			scale(b[c], math.Pow(10, level/20))
		}
		r, _ := e.measure(e.depth.hold(b))
		e.reads(float64(r.Integrated), -23.016)
	}
}

// live is cases 11 and 14: 20 bursts, each 1 dB louder than the last, later and later in segments of twice
// their length. The largest value is read after every segment, less the end that waits in the meter.
func (e *ebu) live(seconds, later float64, largest func(*Meter) float64) {
	var parts []part
	for i := range 20 {
		gap := float64(i) * later
		parts = append(parts, part{gap, silent}, part{seconds, float64(i) - 38}, part{seconds - gap, silent})
	}
	whole := e.tone(append(parts, part{0.1, silent})...)
	m := newMeter(e.t, e.rate, audio.Stereo)
	from := 0
	for i := range 20 {
		to := int(math.Round(2*seconds*float64(i+1)*float64(e.rate))) + e.rate/20
		m.Write(cut(whole, from, to))
		e.reads(loudness(largest(m)), float64(i)-38+0.0067)
		from = to
	}
}

// A sine of 997 Hz at full scale in one front channel reads −3.01 LUFS (BS.1770-5 Annex 1, note), a
// 1 kHz one at −18 dBFS in both −17.993 (Tech 3341 §2.9), at every rate.
func TestCalibration(t *testing.T) {
	for _, rate := range []int{8000, 11025, 16000, 22050, 24000, 32000, 44100, 48000, 88200, 96000, 176400, 192000, 384000} {
		for c := range 3 {
			b := tone(rate, 997, 3, part{2, 0})
			for other := range b {
				if other != c {
					clear(b[other])
				}
			}
			r, _ := measure(t, rate, audio.UsualLayout(3), b)
			near(t, fmt.Sprintf("997 Hz in channel %d at %d Hz", c, rate), r.Integrated, -3.01, 0.004)
		}
		r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, part{2, -18}))
		near(t, fmt.Sprintf("1 kHz in both at %d Hz", rate), r.Integrated, -17.993, 0.004)
	}
}

// cut returns frames [from, to) of b.
func cut(b audio.Block, from, to int) audio.Block { return b.Cut(make(audio.Block, len(b)), from, to) }
