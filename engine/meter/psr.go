package meter

// stepPeak is what is known of the peaks of a step: its largest sample, and between what bounds its true
// peak lies. The true peak of a step is that of the intervals that start in it.
type stepPeak struct{ sample, least, most float64 }

// recallFrames is how far back a search looks: 3 s before a step that ended up to a chunk and a lead ago.
func recallFrames(rate int) int { return int(stepsEnd(shortTermSteps, rate)) + 1 + chunk + 2*lead }

// closeEnough is the part of the least ratio so far below which another must promise to lie to be looked into:
// of tones and steady noise all windows are alike. So MinPSR may be that much too high.
const closeEnough = 0.99977 // −0.001 dB

// searchSteps finds the peaks of every step whose surroundings are complete.
func (m *Meter) searchSteps() {
	for step := len(m.peaks); step < len(m.energies) && m.stepsEnd(step+1)+lead <= m.weighed; step++ {
		var s stepPeak
		for c := range m.recalls {
			s.sample = max(s.sample, m.recalls[c].largest(m.stepsEnd(step), m.stepsEnd(step+1)))
		}
		m.samplePeak = max(m.samplePeak, s.sample)
		s.least, s.most = m.search(step, s.sample, true)
		m.peaks = append(m.peaks, s)
		if s.most > m.truePeak {
			m.refine(step, max(m.truePeak, s.least))
			m.truePeak = max(m.truePeak, m.peaks[step].least)
		}
		m.lowerPSR(step)
	}
}

// stepsEnd is the function of that name at the Meter's rate.
func (m *Meter) stepsEnd(steps int) int64 { return stepsEnd(steps, m.format.Rate) }

// refine narrows the bounds of a step's true peak, down to whether and by how much it is above best.
func (m *Meter) refine(step int, best float64) {
	s := &m.peaks[step]
	peak, bound := m.search(step, best, false)
	if peak > best {
		s.least, s.most = peak, peak
	} else {
		s.most = max(s.least, min(s.most, bound))
	}
}

// search is recall.truePeak of a step over all channels.
func (m *Meter) search(step int, best float64, hasty bool) (peak, bound float64) {
	from, to := m.stepsEnd(step), m.stepsEnd(step+1)
	if step == 0 {
		from = -stretch // what rings ahead of the first sample
	}
	for c := range m.recalls {
		best, bound = m.recalls[c].truePeak(m.kernel, from, to, best, bound, hasty)
	}
	return best, bound
}

// lowerPSR lowers the least ratio of true peak to short-term loudness to that of the full window that ends
// with a step. The window's true peak need be known only while it could be low enough; then the steps that
// could hold it are searched, most promising first.
func (m *Meter) lowerPSR(last int) {
	if last+1 < shortTermSteps || m.stepsEnd(last+1) > m.written {
		return
	}
	mean := course{m.format.Rate, m.energies}.mean(last, shortTermSteps)
	if mean <= power(absoluteGate) {
		return
	}
	for {
		peak, next := 0.0, -1
		for i := last + 1 - shortTermSteps; i <= last; i++ {
			peak = max(peak, m.peaks[i].least)
		}
		if peak*peak >= m.minPSR*mean*closeEnough {
			return
		}
		for i := last + 1 - shortTermSteps; i <= last; i++ {
			if m.peaks[i].most > peak && (next < 0 || m.peaks[i].least > m.peaks[next].least) {
				next = i
			}
		}
		if next < 0 {
			m.minPSR = peak * peak / mean
			return
		}
		m.refine(next, peak)
	}
}
