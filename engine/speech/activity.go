package speech

// What counts as a pause, in dB. The figures were chosen on the sounds the coefficients are fitted on.
const (
	silence   = -70.0 // re full scale: below it nothing is heard
	overFloor = 8.0   // programme rises at least this far over the noise
	underLoud = 22.0  // a pause is at least this far below the loud parts around it
	reach     = 15 * StepsPerSecond
	bridged   = 3                  // shorter gaps, in steps, are part of the programme
	longPause = 1 * StepsPerSecond // what is on its two sides is judged apart
)

// activity tells programme from pauses by the levels of the steps in dB. A pause is what stays near the
// recording's own noise and well below its loud parts, both as they are within quarter of a minute around,
// and is as steady as noise is if it is long.
func activity(levels []float32) []bool {
	active := make([]bool, len(levels))
	threshold(levels, func(i int, limit float64) { active[i] = float64(levels[i]) > limit })
	soft(levels, active)
	settle(active, false, bridged)
	hushed(levels, active)
	return active
}

// threshold calls yield with the level below which each step is a pause.
func threshold(levels []float32, yield func(i int, limit float64)) {
	var around histogram
	for i := -reach; i < len(levels); i++ {
		if in := i + reach; in < len(levels) {
			around.count(levels[in], 1)
		}
		if out := i - reach - 1; out >= 0 {
			around.count(levels[out], -1)
		}
		if i >= 0 {
			floor, loud := around.quantile(0.03), around.quantile(0.9)
			yield(i, max(silence, min(floor+overFloor, loud-underLoud)))
		}
	}
}

// settle turns runs of a value that are shorter than least into what is around them. Runs at the ends stay.
func settle(active []bool, value bool, least int) {
	for i := 0; i < len(active); {
		j := i + 1
		for j < len(active) && active[j] == active[i] {
			j++
		}
		if active[i] == value && j-i < least && i > 0 && j < len(active) {
			for k := i; k < j; k++ {
				active[k] = !value
			}
		}
		i = j
	}
}

// stretches calls yield with the first step of each stretch of programme and the one past its last. There are
// no pauses of a second or longer in it.
func stretches(active []bool, yield func(from, to int)) {
	from, last := -1, 0
	for i, on := range active {
		if !on {
			continue
		}
		if from >= 0 && i-last > longPause {
			yield(from, last+1)
			from = -1
		}
		if from < 0 {
			from = i
		}
		last = i
	}
	if from >= 0 {
		yield(from, last+1)
	}
}

// soft takes back pauses that are soft programme: those not well below what is next to them, and of those of a second
// and longer the ones that are not steady, by the quartiles of the level, so that a cough in a pause does not make it
// programme.
func soft(levels []float32, active []bool) {
	const (
		spread = 1.6 // dB between the quartiles: noise has up to 1, music 2 and more
		drop   = 12  // dB
	)
	pause := func(i int) bool { return i < len(levels) && !active[i] && levels[i] > silence }
	for i := 0; i < len(levels); i++ {
		var run histogram
		first := i
		for ; pause(i); i++ {
			run.count(levels[i], 1)
		}
		if i == first {
			continue
		}
		beside := max(loudest(levels[max(0, first-longPause):first]), loudest(levels[i:min(len(levels), i+longPause)]))
		programme := beside-run.quantile(0.5) < drop ||
			i-first >= longPause && run.quantile(0.75)-run.quantile(0.25) > spread
		for k := first; programme && k < i; k++ {
			active[k] = true
		}
	}
}

// loudest is the highest of some levels.
func loudest(levels []float32) float64 {
	top := float32(lowest)
	for _, v := range levels {
		top = max(top, v)
	}
	return float64(top)
}

// hushed finds the pauses that are longer than what activity looks at: stretches of steady noise, which
// music is not even where it is soft.
func hushed(levels []float32, active []bool) {
	const least, spread = 4 * StepsPerSecond, 0.8 // steps; dB, standard deviation
	var all histogram
	for i, a := range active {
		if a {
			all.count(levels[i], 1)
		}
	}
	limit := all.quantile(0.9) - underLoud
	var sum, squares float64
	for i, v := range levels {
		v := float64(v)
		sum, squares = sum+v, squares+v*v
		if i >= least {
			old := float64(levels[i-least])
			sum, squares = sum-old, squares-old*old
		}
		if mean := sum / least; i >= least-1 && mean < limit && squares/least-mean*mean < spread*spread {
			clear(active[i+1-least : i+1])
		}
	}
}

// histogram counts levels to half a dB. Silence does not count.
type histogram struct {
	bins  [400]int
	total int
}

const oneBin = 0.5 // dB

func (h *histogram) count(level float32, n int) {
	if level > silence {
		h.bins[min(len(h.bins)-1, int((level-silence)/oneBin))] += n
		h.total += n
	}
}

// quantile returns the level below which a share of the counts lies; of no counts, silence.
func (h *histogram) quantile(share float64) float64 {
	left := share * float64(h.total)
	for i, n := range h.bins {
		if left -= float64(n); left <= 0 {
			return silence + oneBin*float64(i)
		}
	}
	return silence
}
