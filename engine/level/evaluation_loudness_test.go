package level_test

import (
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
)

// The meter of the evaluation: ITU-R BS.1770-5 and EBU Tech 3342 written down once more, plainly, for 48 kHz
// only, so that what the engine does is not judged by the engine's own arithmetic.

// kPowers returns the K-weighted mean power of each hop of frames, the channels weighed and added. The filters
// are the two of BS.1770-5 Annex 1, tables 1 and 2.
func kPowers(b audio.Block, hop int) []float64 {
	out := make([]float64, b.Frames()/hop)
	for c, x := range b {
		weight := channelWeight(len(b), c)
		if weight == 0 {
			continue
		}
		var s1, s2, h1, h2 float64 // states of the shelf and of the high pass
		for k := range out {
			sum := 0.0
			for _, v := range x[k*hop : (k+1)*hop] {
				w := float64(v) + 1.69065929318241*s1 - 0.73248077421585*s2
				y := 1.53512485958697*w - 2.69169618940638*s1 + 1.19839281085285*s2
				s1, s2 = w, s1
				w = y + 1.99004745483398*h1 - 0.99007225036621*h2
				y = w - 2*h1 + h2
				h1, h2 = w, h1
				sum += y * y
			}
			out[k] += weight * sum / float64(hop)
		}
	}
	return out
}

// channelWeight is BS.1770's for mono, stereo and 5.1 in the order of the WAVE mask.
func channelWeight(channels, c int) float64 {
	switch {
	case channels == 6 && c == 3:
		return 0
	case channels == 6 && c > 3:
		return 1.41
	default:
		return 1
	}
}

func lufs(power float64) float64 { return -0.691 + 10*math.Log10(power) }

func power(lufs float64) float64 { return math.Pow(10, (lufs+0.691)/10) }

// windows are the means of n neighbouring values.
func windows(powers []float64, n int) []float64 {
	var out []float64
	for i := n; i <= len(powers); i++ {
		out = append(out, mean(powers[i-n:i]))
	}
	return out
}

// gated keeps what is above −70 LUFS and above the mean of that less so many LU.
func gated(powers []float64, relative float64) []float64 {
	kept := above(powers, power(-70))
	return above(kept, mean(kept)*math.Pow(10, -relative/10))
}

func above(powers []float64, limit float64) (kept []float64) {
	for _, p := range powers {
		if p > limit {
			kept = append(kept, p)
		}
	}
	return kept
}

const step = rate / 10

// integrated is the loudness of a programme, LUFS.
func integrated(b audio.Block) float64 { return integratedOf(kPowers(b, step)) }

// integratedOf is the same by its powers of tenths of a second. Of less than 0.4 s the power itself decides.
func integratedOf(tenths []float64) float64 {
	if blocks := gated(windows(tenths, 4), 10); len(blocks) > 0 {
		return lufs(mean(blocks))
	}
	return lufs(mean(tenths))
}

// loudnessRange is the LRA of EBU Tech 3342, LU, without silence put after the end.
func loudnessRange(tenths []float64) float64 {
	kept := gated(windows(tenths, 30), 20)
	if len(kept) == 0 {
		return math.NaN()
	}
	slices.Sort(kept)
	return lufs(kept[int(math.Round(0.95*float64(len(kept)-1)))]) - lufs(kept[int(math.Round(0.10*float64(len(kept)-1)))])
}

// part are the tenths of a second that lie wholly between two times in seconds.
func part(tenths []float64, from, to float64) []float64 {
	a := min(max(0, int(math.Ceil(from*10-1e-6))), len(tenths))
	return tenths[a:max(a, min(int(to*10+1e-6), len(tenths)))]
}

// The meter against signals whose loudness follows from the standard: a sine of 997 Hz at full scale on one
// channel reads −3.01 LUFS (BS.1770-5 Annex 1), and EBU Tech 3342's first two signals have ranges of 10 and 5 LU.
func TestEvaluationMeter(t *testing.T) {
	tone := func(seconds, dBFS float64) audio.Block { return sine(997, seconds, dBFS) }
	if got := integrated(tone(5, 0)); math.Abs(got+3.01) > 0.01 {
		t.Errorf("a full-scale tone reads %.3f LUFS", got)
	}
	for want, levels := range map[float64][2]float64{10: {-20, -30}, 5: {-20, -15}} {
		b := spread(joined(tone(20, levels[0]), tone(20, levels[1]))[0], 2)
		if got := loudnessRange(kPowers(b, step)); math.Abs(got-want) > 0.1 {
			t.Errorf("%v dBFS: range %.2f, want %v", levels, got, want)
		}
	}
}
