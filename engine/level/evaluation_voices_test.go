package level_test

import (
	"fmt"
	"math"
	"os"
	"testing"
)

// voices takes a conversation through talk and transmitter, as delivered and with the ride alone.
func (b bench) voices(t *testing.T, pause string, difference, least, most float64) {
	p := conversation(b.recordings, fmt.Sprintf("%v dB, pauses %s", difference, pause), 24, difference, least, most)
	source := b.written(t, p)
	defer os.Remove(source)

	full := b.level(t, p, source, named(t, "talk"))
	defer full.done()
	between, turns := residual(full)
	residualRow := map[bool]*row{true: residualLong, false: residualLong6}[difference > 6]
	switch {
	case pause != pauses[0].name && difference == 6:
		residualRow = residualShown
	case pause == pauses[1].name:
		residualRow = residualShort
	case pause == pauses[2].name:
		residualRow = residualNone
	}
	b.note(residualRow, full.on(), between)
	tenthsIn, tenthsOut := kPowers(p.sound, step), kPowers(full.out, step)
	b.note(talkRange, full.on(), loudnessRange(tenthsOut))
	b.again(t, full)

	alone := b.level(t, p, source, bare(t, "talk"))
	defer alone.done()
	gain := alone.gain()
	settle := settling(p, gain)
	slew := slews(p, gain)
	if pause == pauses[0].name {
		b.note(settleMeanRow, alone.on(), mean(settle))
		b.note(settleMostRow, alone.on(), quantile(settle, 0.9))
		b.note(slewMediumRow, alone.on(), mean(slew))
		b.note(slewPeakRow, alone.on(), quantile(slew, 0.95))
		fast := b.level(t, p, source, bare(t, "transmitter"))
		defer fast.done()
		b.note(slewFastRow, fast.on(), mean(slews(p, fast.gain())))
	} else {
		b.note(settleOtherRow, alone.on(), mean(settle))
	}
	lifted := math.NaN()
	if most > 0 {
		lifted = mean(pauseGains(p, gain))
		to := map[bool]*row{true: pauseNearRow, false: pauseFarRow}[difference <= 12]
		if pause != pauses[0].name {
			to = pauseShown
		}
		b.note(to, alone.on(), lifted)
	}
	aloneBetween, _ := residual(alone)
	b.line("Two voices", "| %s | %2.0f | %.2f | %.2f | %.2f | %.2f / %.2f | %.2f | %s | %.1f → %.1f |", pause, difference, between, aloneBetween, turns,
		mean(settle), quantile(settle, 0.9), mean(slew), residualRow.number(lifted), loudnessRange(tenthsIn), loudnessRange(tenthsOut))
}

// residual is how far the loudness of one voice's turns lies from the other's in the copy, LU, and the standard
// deviation of the single turns.
func residual(r run) (between, single float64) {
	tenths := kPowers(r.out, step)
	all := map[int][]float64{}
	var levels []float64
	for _, t := range r.turns {
		of := part(tenths, t.from, t.to)
		all[t.voice] = append(all[t.voice], of...)
		levels = append(levels, integratedOf(of))
	}
	return math.Abs(integratedOf(all[0]) - integratedOf(all[1])), deviation(levels)
}

// settling is, for every change of voice, how long after the onset the gain stays within 1 dB of the turn's own
// for a second, s.
func settling(p programme, gain []float64) (out []float64) {
	for i, t := range p.turns {
		if i == 0 || t.voice == p.turns[i-1].voice {
			continue
		}
		settled := median(within(gain, t.from+1, t.to))
		late := 0.0
		for at := t.from; at < t.to-1; at += 0.01 {
			off := within(gain, at, at+1)
			if max(most(off)-settled, settled-least(off)) <= 1 {
				break
			}
			late = at + 0.01 - t.from
		}
		out = append(out, late)
	}
	return out
}

// slews are the sizes of the slopes of the gain over half a second, dB/s, inside the turns, every 100 ms.
func slews(p programme, gain []float64) (out []float64) {
	for _, t := range p.turns {
		for at := t.from + 0.5; at+0.5 < t.to-0.25; at += 0.1 {
			a, b := int(at*gainSteps), int((at+0.5)*gainSteps)
			if v := math.Abs(gain[b]-gain[a]) / 0.5; !math.IsNaN(v) {
				out = append(out, v)
			}
		}
	}
	return out
}

// pauseGains is by how much the gain of each pause lies over that of its neighbour with the lower gain, dB.
func pauseGains(p programme, gain []float64) (out []float64) {
	for i := 1; i < len(p.turns); i++ {
		before, after := p.turns[i-1], p.turns[i]
		inside := within(gain, before.to, after.from)
		lower := min(median(within(gain, before.from, before.to)), median(within(gain, after.from, after.to)))
		if len(inside) > 0 {
			out = append(out, mean(inside)-lower)
		}
	}
	return out
}

// evenness takes programmes that move through 40 dB through the profiles that have to even them out.
func (b bench) evenness(t *testing.T) {
	for _, p := range []programme{ramp(b.recordings, 180), steps(b.recordings, 20)} {
		source := b.written(t, p)
		r := b.level(t, p, source, bare(t, "talk"))
		b.note(octantRow, r.on(), deviation(octants(r)))
		r.done()
		os.Remove(source)
	}
	p := window(b.recordings, 24)
	source := b.written(t, p)
	defer os.Remove(source)
	for _, name := range []string{"talk", "transmitter"} {
		r := b.level(t, p, source, named(t, name))
		b.note(windowOctants, r.on(), deviation(octants(r)))
		b.note(windowRange, r.on(), loudnessRange(kPowers(r.out, step)))
		r.done()
	}
}

// octants are the loudnesses of the eighths of a copy.
func octants(r run) (out []float64) {
	tenths := kPowers(r.out, step)
	for i := range 8 {
		out = append(out, integratedOf(tenths[i*len(tenths)/8:(i+1)*len(tenths)/8]))
	}
	return out
}
