// Package meter measures what a programme's loudness and peaks are, by the published standards.
//
// Loudness (ITU-R BS.1770-5): each channel is K-weighted, squared and averaged; the weighted sum of the
// channels, −0.691 + 10·log10, is in LUFS. Windows of 400 ms give momentary, of 3 s short-term
// loudness. The integrated loudness of a programme is that of the mean power of its 400 ms blocks,
// every 100 ms, that lie above −70 LUFS and then above the mean of those less 10 LU. The loudness range
// (EBU Tech 3342) is the span from the 10th to the 95th percentile of short-term loudness after gates at
// −70 LUFS and at the mean less 20 LU.
//
// True peak (BS.1770 Annex 2) is the largest magnitude between the samples, read on a grid of 32 points
// a sample, with silence before and after the programme.
//
// Samples go in as they come; Meter copies them into chunks of fixed length, so that a reading does not
// depend, not even in its last bit, on how the programme was cut into blocks. All arithmetic is float64.
// Loops over samples are marked norace: a Meter belongs to one goroutine, and tests of whole recordings
// would take twenty times as long under the race detector.
package meter

import (
	"cmp"
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// The rates a Meter can be made for, Hz.
const (
	MinRate = 8000
	MaxRate = 384000
)

// chunk is how many frames are worked on at a time: a lane of them stays in the first-level cache.
const chunk = 32 * stretch

// Meter takes one programme and gives its Reading. Make one with New. It is not safe for concurrent use.
type Meter struct {
	format  audio.Format
	mono    audio.MonoRule
	weights []float64
	filters []weighting
	lanes   []lane
	recalls []recall
	kernel  *kernel

	filled  int   // frames waiting in the lanes
	written int64 // frames of the programme so far
	weighed int64 // frames that went through the filters, silence after the end included
	bad     int64
	ended   bool

	hop        int64     // index of the hop being summed
	hopEnd     int64     // frame at which it ends
	sums       []float64 // its energy, by channel
	squares    []float64 // of all samples so far, by channel
	recent     []float64 // energies of the last hops, a ring
	momentary  float64   // energy of the last 400 ms
	shortTerm  float64   // energy of the last 3 s
	step       float64   // energy of the hops of the unfinished step
	energies   []float64 // of every step
	peaks      []stepPeak
	truePeak   float64
	minPSR     float64 // squared true peak over mean power
	samplePeak float64
	maxMoment  float64 // mean power
	maxShort   float64 // mean power
}

// New returns a Meter, or an error if the format cannot be measured. mono says how a single
// channel counts; "" is audio.OneChannel.
func New(f audio.Format, mono audio.MonoRule) (*Meter, error) {
	if f.Rate < MinRate || f.Rate > MaxRate {
		return nil, fmt.Errorf("meter: a sampling rate of %d Hz is not between %d and %d", f.Rate, MinRate, MaxRate)
	}
	if f.Layout.Channels < 1 {
		return nil, fmt.Errorf("meter: %d channels", f.Layout.Channels)
	}
	m := &Meter{
		format:  f,
		mono:    cmp.Or(mono, audio.OneChannel),
		weights: weights(f.Layout, mono),
		filters: make([]weighting, f.Layout.Channels),
		lanes:   make([]lane, f.Layout.Channels),
		recalls: make([]recall, f.Layout.Channels),
		kernel:  interpolator(),
		sums:    make([]float64, f.Layout.Channels),
		squares: make([]float64, f.Layout.Channels),
		recent:  make([]float64, shortTermSteps*hopsPerStep),
	}
	k := newWeighting(f.Rate)
	for c := range m.lanes {
		m.filters[c] = k
		m.lanes[c] = newLane(chunk)
		m.recalls[c] = newRecall(recallFrames(f.Rate))
	}
	m.Reset()
	return m, nil
}

// Reset makes the Meter ready for another programme of the same format.
func (m *Meter) Reset() {
	for c := range m.lanes {
		m.lanes[c].reset()
		m.recalls[c].reset()
		m.filters[c].past = past{}
	}
	clear(m.sums)
	clear(m.squares)
	clear(m.recent)
	*m = Meter{
		format: m.format, mono: m.mono, weights: m.weights, filters: m.filters, lanes: m.lanes, recalls: m.recalls,
		kernel: m.kernel, sums: m.sums, squares: m.squares, recent: m.recent, energies: m.energies[:0], peaks: m.peaks[:0],
		minPSR: math.Inf(1),
	}
	m.hopEnd = hopsEnd(1, m.format.Rate)
}

// Write measures a block of any length. The block must have the channels of the Meter's format; it is
// neither kept nor changed. Samples that are not finite numbers count as silence; see BadSamples.
// Write must not follow Finish unless Reset comes between.
func (m *Meter) Write(b audio.Block) {
	for at, n := 0, b.Frames(); at < n; {
		take := min(n-at, chunk-m.filled)
		for c := range m.lanes {
			copy(m.lanes[c].raw[m.filled:], b[c][at:at+take])
		}
		at += take
		m.filled += take
		m.written += int64(take)
		if m.filled == chunk {
			m.work()
		}
	}
}

// BadSamples returns how many samples were not finite numbers; after Finish, of the whole programme.
func (m *Meter) BadSamples() int64 { return m.bad }

// work measures the chunk that has been filled.
func (m *Meter) work() {
	for c := range m.lanes {
		m.bad += m.lanes[c].load()
		m.recalls[c].keep(&m.lanes[c], m.weighed)
	}
	for at := 0; at < chunk; {
		take := int(min(int64(chunk-at), m.hopEnd-m.weighed))
		for c := range m.lanes {
			x := m.lanes[c].x[lead+at:][:take]
			if m.weights[c] != 0 {
				m.sums[c], m.squares[c] = m.filters[c].add(m.sums[c], m.squares[c], x)
			} else {
				m.squares[c] = addSquares(m.squares[c], x)
			}
		}
		at += take
		m.weighed += int64(take)
		if m.weighed == m.hopEnd {
			m.endHop()
		}
	}
	for c := range m.lanes {
		m.lanes[c].advance()
	}
	m.filled = 0
	m.searchSteps()
}

// endHop closes a hop of 10 ms, and with every tenth a step.
func (m *Meter) endHop() {
	energy := 0.0
	for c := range m.sums {
		energy += m.weights[c] * m.filters[c].scale * m.sums[c]
		m.sums[c] = 0
		m.filters[c].settle()
	}
	m.momentary += energy - m.hopsAgo(momentarySteps*hopsPerStep)
	m.shortTerm += energy - m.hopsAgo(shortTermSteps*hopsPerStep)
	m.recent[m.hop%int64(len(m.recent))] = energy
	m.hop++
	if m.weighed <= m.written { // silence after the end is no part of the programme
		m.maxMoment = max(m.maxMoment, m.meanOf(m.momentary, momentarySteps*hopsPerStep))
		m.maxShort = max(m.maxShort, m.meanOf(m.shortTerm, shortTermSteps*hopsPerStep))
	}
	m.step += energy
	if m.hop%hopsPerStep == 0 {
		m.energies = append(m.energies, m.step)
		m.step = 0
	}
	m.hopEnd = hopsEnd(m.hop+1, m.format.Rate)
}

// hopsAgo returns the energy of the hop n before the one being closed, 0 before the start.
func (m *Meter) hopsAgo(n int64) float64 {
	if m.hop < n {
		return 0
	}
	return m.recent[(m.hop-n)%int64(len(m.recent))]
}

// meanOf returns the mean power of the window of n hops that ends here, 0 before it is full.
func (m *Meter) meanOf(energy float64, n int64) float64 {
	if m.hop < n {
		return 0
	}
	return energy / float64(hopsEnd(m.hop, m.format.Rate)-hopsEnd(m.hop-n, m.format.Rate))
}
