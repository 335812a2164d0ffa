package media

import (
	"math"
	"slices"
)

// shaper is the memory of noise-shaped dither: what the last roundings were off by is fed back, so that the noise N of
// the result is that of flat dither behind the filter 1 + Σ w_k z^−k, which moves it to where the ear is dull.
//
// A rounding is off by 1½ LSB at the most, 1 of dither and ½ of rounding, and no more than that is ever fed back, even
// where full scale clips. So the result is off by 1½·(1 + Σ|w|) LSB at the most: 7.5 at 44.1 kHz,
// 10.5 at 32 kHz, more at no other rate in use.
type shaper struct {
	weights [shapeOrder]int64 // of the errors, in 2^−16
	errors  [shapeOrder]int64 // of the last samples, newest first, in units
	run     int               // samples in a row that are whole numbers
}

const (
	shapeOrder = 7
	weightBits = 16
	mostError  = oneLSB + halfLSB
)

func newShaper(weights []int64) *shaper {
	s := &shaper{run: shapeOrder} // before the recording there was silence
	copy(s.weights[:], weights)
	return s
}

// shaped rounds with shaped noise. Digital silence stays silent at once. Other whole numbers pass unchanged when there
// is no error left to make good, at the latest after as many as are remembered: a single one among others is a
// coincidence, and leaving the noise out there would spoil its shape.
func (q *quantiser) shaped(dst []int32, src, first []float32) {
	dst = dst[:len(src)]
	s := q.shaper
	for i, x := range src {
		q.noise += stride
		if outside(x) {
			dst[i] = clipped(x, q.low, q.high)
			s.remember(0)
			continue
		}
		fixed := int64(float64(x) * q.scale)
		if s.run++; fixed&(oneLSB-1) != 0 {
			s.run = 0
		}
		exact := s.run > shapeOrder
		if exact {
			clear(s.errors[:])
		}
		wanted := fixed + s.owed()
		whole := fixed >> fraction
		if !exact && fixed != 0 {
			draw := q.noise
			if x == first[i] {
				draw -= q.apart
			}
			whole = (wanted + triangle(draw) + halfLSB) >> fraction
		}
		whole = min(max(whole, q.low), q.high)
		s.remember(whole<<fraction - wanted)
		dst[i] = int32(whole)
	}
}

// owed is what the last errors add to a sample.
func (s *shaper) owed() int64 {
	w, e := &s.weights, &s.errors
	return (w[0]*e[0] + w[1]*e[1] + w[2]*e[2] + w[3]*e[3] + w[4]*e[4] + w[5]*e[5] + w[6]*e[6]) >> weightBits
}

func (s *shaper) remember(e int64) {
	copy(s.errors[1:], s.errors[:])
	s.errors[0] = min(max(e, -mostError), mostError)
}

// shape returns the weights for a sampling rate: those with which the noise, weighted by how well each frequency is
// heard, is least. That is linear prediction of a signal whose spectrum is the weight: the normal equations of its
// autocorrelation, solved by Levinson's recursion. Its filter has all zeros inside the unit circle, so the average of
// its logarithmic response is 0 dB, which no shaper can be under (M. Gerzon, P. Craven, "Optimal Noise Shaping and
// Dither of Digital Signals", AES preprint 2822, 1989): what is gained here has to be paid there.
func shape(rate int) []int64 {
	r := hearing(rate)
	w, rest := make([]float64, 0, shapeOrder), r[0]
	for k := 1; k <= shapeOrder; k++ {
		reflection := -r[k]
		for j, a := range w {
			reflection -= a * r[k-1-j]
		}
		reflection /= rest
		mirrored := slices.Clone(w)
		slices.Reverse(mirrored)
		for j := range w {
			w[j] += reflection * mirrored[j]
		}
		w = append(w, reflection)
		rest *= 1 - reflection*reflection
	}
	fixed := make([]int64, shapeOrder)
	for k, a := range w {
		fixed[k] = int64(math.Round(a * (1 << weightBits)))
	}
	return fixed
}

// dullest is the threshold, dB, over which the ear is taken to be equally dull everywhere. Without it all noise would go
// to the last kilohertz, and its total would rise by much more than the 7 to 8 dB it does.
const dullest = 25

// hearing returns the autocorrelation of the power spectrum that is the reciprocal of hearing's threshold in quiet, by
// E. Terhardt's formula ("Calculating virtual pitch", Hearing Research 1, 1979; from memory).
func hearing(rate int) (r [shapeOrder + 1]float64) {
	const points = 1024
	for i := range points {
		turn := (float64(i) + 0.5) / points * math.Pi
		kHz := max(0.02, turn/math.Pi*float64(rate)/2000)
		threshold := 3.64*math.Pow(kHz, -0.8) - 6.5*math.Exp(-0.6*(kHz-3.3)*(kHz-3.3)) + 1e-3*math.Pow(kHz, 4)
		power := math.Pow(10, -min(threshold, dullest)/10)
		for k := range r {
			r[k] += power * math.Cos(float64(k)*turn)
		}
	}
	return r
}
