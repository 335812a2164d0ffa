package level_test

import (
	"fmt"
	"math"
	"os"
	"testing"

	"evenshelf/engine/audio"
)

// wideMusic takes one piece of music with a wide range through the profiles for music. The six have ranges of
// 13 to 22 LU.
func (b bench) wideMusic(t *testing.T, i int) {
	seed := []uint64{1, 2, 3, 6, 7, 8}[i]
	abrupt := i%2 == 1
	name := fmt.Sprintf("%s with a wide range, %s", pieces[i%3], map[bool]string{true: "abrupt", false: "slow"}[abrupt])
	p := wide(b.recordings, name, i%3, seed, 90, 25, abrupt)
	source := b.written(t, p)
	defer os.Remove(source)
	tenths := kPowers(p.sound, step)
	if wide := loudnessRange(tenths); wide < 13 || wide > 22.5 {
		t.Errorf("%s has a range of %.1f LU: the test proves less than it says", name, wide)
	}
	for _, with := range []struct {
		profile      string
		width, order *row
	}{{"concert", concertRange, concertOrder}, {"rotation", rotationRange, rotationOrder}} {
		r := b.level(t, p, source, named(t, with.profile))
		out := kPowers(r.out, step)
		b.note(with.width, r.on(), loudnessRange(out))
		b.note(with.order, r.on(), spearman(blocks(tenths), blocks(out)))
		if r.Plan.Ride != nil {
			b.note(rangeForeseen, r.on(), math.Abs(float64(r.Plan.Ride.Range)-loudnessRange(out)))
		}
		b.line("Music with a wide range", "| %s | %s | %.1f → %.1f | %.3f |", name, with.profile, loudnessRange(tenths), loudnessRange(out), spearman(blocks(tenths), blocks(out)))
		r.done()
	}
	alone := b.level(t, p, source, bare(t, "concert"))
	b.note(map[bool]*row{true: jumpSlew, false: concertSlew}[abrupt], alone.on(), fastest(alone.gain()))
	alone.done()
}

// blocks are the loudnesses of 3 s blocks.
func blocks(tenths []float64) (out []float64) {
	for i := 30; i <= len(tenths); i += 30 {
		out = append(out, lufs(mean(tenths[i-30:i])+1e-12))
	}
	return out
}

// fastest is the largest change of a gain over a second, dB/s.
func fastest(gain []float64) (top float64) {
	for i := gainSteps; i < len(gain); i++ {
		if v := math.Abs(gain[i] - gain[i-gainSteps]); v > top {
			top = v
		}
	}
	return top
}

// fades takes music with fades at both ends through rides alone.
func (b bench) fades(t *testing.T) {
	for i := range pieces {
		p := faded(b.recordings, i, 60)
		source := b.written(t, p)
		for _, name := range []string{"concert", "rotation", "film", "transmitter"} {
			r := b.level(t, p, source, bare(t, name))
			gain, end := r.gain(), p.seconds()
			for where, span := range map[string][2]float64{"in": {0, fadeSeconds}, "out": {end - fadeSeconds, end}} {
				of := within(gain, span[0], span[1])
				b.note(fadeRow, r.on()+", fade-"+where, most(of)-least(of))
			}
			r.done()
		}
		os.Remove(source)
	}
	p := tutti(b.recordings)
	source := b.written(t, p)
	defer os.Remove(source)
	for _, name := range []string{"concert", "rotation"} {
		r := b.level(t, p, source, bare(t, name))
		gain := r.gain()
		b.note(jumpSlew, r.on(), fastest(gain))
		for _, i := range []int{1, 3} {
			at := p.turns[i].from
			b.note(tuttiRow, fmt.Sprintf("%s, at %.0f s", r.on(), at), mean(within(gain, at, at+1))-median(within(gain, at+4, p.turns[i].to)))
		}
		r.done()
	}
}

// quietParts looks at the gain where nobody speaks.
func (b bench) quietParts(t *testing.T) {
	p := silent(b.recordings)
	source := b.written(t, p)
	for _, name := range []string{"talk", "film", "transmitter"} {
		r := b.level(t, p, source, bare(t, name))
		gain := r.gain()
		for i := 1; i < len(p.turns); i++ {
			before, after := p.turns[i-1], p.turns[i]
			if after.from-before.to < 7 {
				continue
			}
			lower := min(median(within(gain, before.from, before.to)), median(within(gain, after.from, after.to)))
			b.note(silenceRow, r.on(), most(within(gain, before.to+0.5, after.from-0.5))-lower)
		}
		r.done()
	}
	os.Remove(source)
	p = clapped(b.recordings)
	source = b.written(t, p)
	defer os.Remove(source)
	for _, name := range []string{"talk", "film"} {
		r := b.level(t, p, source, bare(t, name))
		gain := r.gain()
		for i, x := range p.turns {
			if x.kind == applause {
				before, after := p.turns[i-1], p.turns[i+1]
				lower := min(median(within(gain, before.from, before.to)), median(within(gain, after.from, after.to)))
				b.note(clapRow, r.on(), median(within(gain, x.from+0.5, x.to-2))-lower)
			}
		}
		r.done()
	}
	for name, noise := range map[string]func(float64) audio.Block{"hum": hum, "a fan": fan} {
		p := buzzing(b.recordings, "speech with "+name, noise)
		source := b.written(t, p)
		r := b.level(t, p, source, bare(t, "talk"))
		b.note(noiseRow, r.on(), mean(pauseGains(p, r.gain())))
		r.done()
		os.Remove(source)
	}
}
