package meter

import (
	"fmt"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// The signals are those of EBU Tech 3341 v4 (2023), Table 1, and Tech 3342 v4, made here from their
// descriptions. The standard allows ±0.1 LU; these tests hold the engine to what an ideal meter reads.
const (
	tolIdeal = 0.02 // LU, signals whose steps fall between samples or windows
	tolTight = 0.01 // LU, steady tones
)

func atRates(t *testing.T, test func(t *testing.T, rate int)) {
	for _, rate := range rates {
		t.Run(fmt.Sprint(rate), func(t *testing.T) { t.Parallel(); test(t, rate) })
	}
}

func TestTech3341Integrated(t *testing.T) {
	tests := []struct {
		name  string
		parts []part
		ideal float64 // LUFS, of a double-precision meter
		tol   float64
	}{
		{"1", []part{{20, -23}}, -22.993, tolTight},
		{"2", []part{{20, -33}}, -32.993, tolTight},
		{"3", []part{{10, -36}, {60, -23}, {10, -36}}, -23.014, tolTight},
		{"4", []part{{10, -72}, {10, -36}, {60, -23}, {10, -36}, {10, -72}}, -23.014, tolTight},
		{"5", []part{{20, -26}, {20.1, -20}, {20, -26}}, -22.979, tolTight},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			atRates(t, func(t *testing.T, rate int) {
				r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, test.parts...))
				near(t, "integrated", r.Integrated, test.ideal, test.tol)
				if len(test.parts) == 1 {
					near(t, "max momentary", r.MaxMomentary, test.ideal, test.tol)
					near(t, "max short-term", r.MaxShortTerm, test.ideal, test.tol)
				}
			})
		})
	}
}

func TestTech3341Surround(t *testing.T) { // case 6
	for _, layout := range []audio.Layout{front51, audio.UsualLayout(6)} {
		t.Run(layout.String(), func(t *testing.T) {
			atRates(t, func(t *testing.T, rate int) {
				b := tone(rate, 1000, layout.Channels, part{20, 0})
				for c := range b {
					level := map[audio.Speaker]float64{
						audio.FrontLeft: -28, audio.FrontRight: -28, audio.FrontCentre: -24,
						audio.BackLeft: -30, audio.BackRight: -30, audio.LowFrequency: silent,
					}[layout.Position(c)]
					scale(b[c], math.Pow(10, level/20))
				}
				r, _ := measure(t, rate, layout, b)
				near(t, "integrated", r.Integrated, -23.016, tolTight)
			})
		})
	}
}

func TestTech3341ShortTerm(t *testing.T) { // cases 9 to 11
	atRates(t, func(t *testing.T, rate int) {
		_, line := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, repeat(5, part{1.34, -20}, part{1.66, -30})...))
		for i := 29; i < len(line.ShortTerm); i++ {
			near(t, fmt.Sprintf("case 9 at %.1f s", float64(i+1)*line.Step), float64(line.ShortTerm[i]), -22.986, tolIdeal)
		}
		for i := range 20 {
			r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, part{float64(i) * 0.15, silent}, part{3, -23}, part{1, silent}))
			near(t, fmt.Sprint("case 10 segment ", i), r.MaxShortTerm, -22.993, tolIdeal)
		}
		var live []part
		for i := range 20 {
			gap := float64(i) * 0.15
			live = append(live, part{gap, silent}, part{3, float64(i) - 38}, part{3 - gap, silent})
		}
		whole := tone(rate, 1000, 2, live...)
		m := newMeter(t, rate, audio.Stereo)
		for i := range 20 { // the largest value up to the end of each segment, the last 3/20 s of it silent
			m.Write(cut(whole, 6*rate*i, 6*rate*(i+1)))
			near(t, fmt.Sprint("case 11 segment ", i), loudness(m.maxShort), float64(i)-38+0.007, tolIdeal)
		}
	})
}

func TestTech3341Momentary(t *testing.T) { // cases 12 to 14
	atRates(t, func(t *testing.T, rate int) {
		_, line := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, repeat(25, part{0.18, -20}, part{0.22, -30})...))
		for i := 9; i < len(line.Momentary); i++ {
			near(t, fmt.Sprintf("case 12 at %.1f s", float64(i+1)*line.Step), float64(line.Momentary[i]), -22.960, tolIdeal)
		}
		var live []part
		for i := range 20 {
			gap := float64(i) * 0.02
			live = append(live, part{gap, silent}, part{0.4, float64(i) - 38}, part{0.4 - gap, silent})
			r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, part{gap, silent}, part{0.4, -23}, part{1, silent}))
			near(t, fmt.Sprint("case 13 segment ", i), r.MaxMomentary, -22.994, tolIdeal)
		}
		whole := tone(rate, 1000, 2, append(live, part{0.1, silent})...)
		m := newMeter(t, rate, audio.Stereo)
		from := 0
		for i := range 20 { // up to 0.1 s into the next segment, for the frames that wait in the meter
			to := rate*8*(i+1)/10 + rate/10
			m.Write(cut(whole, from, to))
			near(t, fmt.Sprint("case 14 segment ", i), loudness(m.maxMoment), float64(i)-38+0.006, tolIdeal)
			from = to
		}
	})
}

func TestTech3342(t *testing.T) {
	tests := []struct {
		name  string
		parts []part
		want  float64 // LU
	}{
		{"1", []part{{20, -20}, {20, -30}}, 10},
		{"2", []part{{20, -20}, {20, -15}}, 5},
		{"3", []part{{20, -40}, {20, -20}}, 20},
		{"4", []part{{20, -50}, {20, -35}, {20, -20}, {20, -35}, {20, -50}}, 15},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			atRates(t, func(t *testing.T, rate int) {
				r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, test.parts...))
				near(t, "range", r.Range, test.want, tolIdeal)
			})
		})
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
