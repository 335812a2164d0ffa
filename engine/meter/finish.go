package meter

import (
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// Finish ends the programme and returns what was measured. Call it once; after Reset, once again.
//
// What is not defined is audio.Undefined or infinite: every level for silence; Integrated, MaxMomentary and
// NoiseFloor under 400 ms; MaxShortTerm, Range and MinPSR under 3 s.
func (m *Meter) Finish() (Reading, Timeline) {
	m.runOut()
	f := m.format
	steps := wholeSteps(m.written, f.Rate)
	programme := course{f.Rate, m.energies[:steps]}
	followed := course{f.Rate, m.energies[:steps+rangeTail]}
	r := Unmeasured()
	r.SampleRate, r.Channels, r.Layout, r.MonoRule = f.Rate, f.Layout.Channels, f.Layout.String(), m.mono
	r.Frames, r.Duration = m.written, f.Seconds(m.written)
	r.Integrated = integrated(programme.whole(momentarySteps))
	r.TruePeak = audio.DBTP(audio.ToDB(m.truePeak))
	r.SamplePeak = audio.DBFS(audio.ToDB(m.samplePeak))
	if steps >= momentarySteps {
		r.MaxMomentary = audio.LUFS(loudness(m.maxMoment))
	}
	r.ShortTerm10, r.ShortTerm50, r.ShortTerm95 = r.Integrated, r.Integrated, r.Integrated
	if steps >= shortTermSteps {
		r.MaxShortTerm = audio.LUFS(loudness(m.maxShort))
		r.Range = loudnessRange(followed.whole(shortTermSteps))
		r.ShortTerm10, r.ShortTerm50, r.ShortTerm95 = spread(programme.whole(shortTermSteps))
	}
	r.PLR = audio.LU(float64(r.TruePeak) - float64(r.Integrated))
	r.MinPSR = audio.LU(-loudness(1 / m.minPSR)) // +Inf where no window counts
	r.RMS, r.CrestFactor = m.rms()
	r.NoiseFloor = noiseFloor(programme.whole(momentarySteps), m.peaks[:steps])
	return r, m.timeline()
}

// rms returns the rms of all channels together, of which a full-scale sine has 0 dBFS, and the crest factor.
func (m *Meter) rms() (audio.DBFS, audio.DB) {
	sum := 0.0
	for _, s := range m.squares {
		sum += s
	}
	mean := sum / (float64(m.written) * float64(len(m.squares)))
	return audio.DBFS(10 * math.Log10(2*mean)), audio.DB(10 * math.Log10(m.samplePeak*m.samplePeak/mean))
}

// noiseFloor returns the 5th percentile of the powers of full momentary windows. Windows in which a step is
// digital silence are left out, so that neither a gap nor the edge of one passes for noise.
func noiseFloor(momentary []float64, peaks []stepPeak) audio.LUFS {
	nothing := audio.DB(digitalSilence).Linear()
	var sounding []float64
	for i, p := range momentary {
		if !slices.ContainsFunc(peaks[i:i+momentarySteps], func(s stepPeak) bool { return s.sample < nothing }) {
			sounding = append(sounding, p)
		}
	}
	sounding = sortedAbove(sounding, power(digitalSilence))
	if len(sounding) == 0 {
		return audio.LUFS(audio.Undefined)
	}
	return audio.LUFS(loudness(percentile(sounding, 5)))
}

// spread returns the 10th, 50th and 95th percentile of the short-term powers above −70 LUFS.
func spread(shortTerm []float64) (p10, p50, p95 audio.LUFS) {
	kept := sortedAbove(shortTerm, power(absoluteGate))
	if len(kept) == 0 {
		none := audio.LUFS(audio.Undefined)
		return none, none, none
	}
	at := func(p float64) audio.LUFS { return audio.LUFS(loudness(percentile(kept, p))) }
	return at(10), at(50), at(95)
}

// runOut feeds the silence after the programme: past the reach of the true-peak kernel, and until the
// step under way and the tail of the loudness range are complete.
func (m *Meter) runOut() {
	if m.ended {
		return
	}
	m.ended = true
	end := max(stepsEnd(m.steps()+rangeTail, m.format.Rate), m.written+lead)
	for m.weighed < end {
		for c := range m.lanes {
			clear(m.lanes[c].raw[m.filled:])
		}
		m.work()
	}
}

// steps returns how many steps the programme touches.
func (m *Meter) steps() int {
	n := wholeSteps(m.written, m.format.Rate)
	if stepsEnd(n, m.format.Rate) < m.written {
		n++
	}
	return n
}

// timeline returns the course of the programme. A last step that is not whole ends in silence.
func (m *Meter) timeline() Timeline {
	n := m.steps()
	t := Timeline{
		Step:      1.0 / stepsPerSecond,
		Level:     make([]float32, n),
		Momentary: make([]float32, n),
		ShortTerm: make([]float32, n),
		Peak:      make([]float32, n),
	}
	c := course{m.format.Rate, m.energies}
	for i := range n {
		t.Level[i] = float32(loudness(c.mean(i, 1)))
		t.Momentary[i] = float32(loudness(c.mean(i, momentarySteps)))
		t.ShortTerm[i] = float32(loudness(c.mean(i, shortTermSteps)))
		t.Peak[i] = float32(audio.ToDB(m.peaks[i].sample))
	}
	return t
}
