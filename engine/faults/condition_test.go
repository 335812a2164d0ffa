package faults

import (
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// The figures of a recording's condition are those it was made with: 1.5 and 0.5 s of silence, levels 6.02 dB
// apart, half a correlation by a tone and one at right angles to it, an offset of −0.02 on the right.
func TestCondition(t *testing.T) {
	const rate = 48000
	b := audio.NewBlock(2, 5*rate)
	for i := rate * 3 / 2; i < rate*9/2; i++ {
		phase := 2 * math.Pi * 500 * float64(i) / rate
		b[0][i] = float32(0.4 * math.Cos(phase))
		b[1][i] = float32(0.2*(0.5*math.Cos(phase)+math.Sqrt(0.75)*math.Sin(phase))) - 0.02*5/3
	}
	d := New(audio.Format{Rate: rate, Layout: audio.Stereo})
	d.Write(b)
	_, got := d.Finish()
	offset := 0.02 / 0.2 * 0.02 / 0.2 * 2 * 5 / 3 * 5 / 3 // power of the offset over that of the tone
	near := func(what string, got, want float64) {
		if !(math.Abs(got-want) < 1e-3) {
			t.Errorf("%s is %g, want %g", what, got, want)
		}
	}
	near("silence at the head", float64(got.HeadSilence), 1.5)
	near("silence at the tail", float64(got.TailSilence), 0.5)
	near("correlation", float64(got.Correlation), 0.5/math.Sqrt(1+offset))
	near("balance", float64(got.Balance), -20*math.Log10(2)+10*math.Log10(1+offset))
	near("offset", float64(got.Offset), -0.02)

	d = New(audio.Format{Rate: rate, Layout: audio.Mono})
	d.Write(audio.NewBlock(1, 2*rate))
	_, got = d.Finish()
	near("silence of a silent recording", float64(got.HeadSilence), 2)
	near("silence at its tail", float64(got.TailSilence), 0)
	if audio.Defined(got.Correlation) || audio.Defined(got.Balance) {
		t.Errorf("one channel has a correlation or a balance: %+v", got)
	}
	d = New(audio.Format{Rate: rate, Layout: audio.Stereo})
	if _, got := d.Finish(); audio.Defined(got.HeadSilence) || audio.Defined(got.Offset) || audio.Defined(got.Balance) {
		t.Errorf("an empty recording has a condition: %+v", got)
	}
}
