package faults

import (
	"encoding/binary"
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
)

// Whatever the samples, the rate and the channels are, nothing panics; every fault lies within the recording,
// has words and finite figures; the condition's figures are finite or undefined; and however the recording is
// cut into blocks, the same is found.
func FuzzDetector(f *testing.F) {
	tone := make([]byte, 4*1500)
	for i := range len(tone) / 4 {
		v := 0.5 * math.Sin(float64(i)/7)
		switch i % 1000 {
		case 400:
			v = 0.9
		case 500, 501, 502, 503, 504, 505, 506, 507, 508, 509:
			v = 0
		}
		binary.LittleEndian.PutUint32(tone[4*i:], math.Float32bits(float32(v)))
	}
	f.Add(tone, uint32(8000), uint8(0), uint16(4096))
	f.Add(tone, uint32(4000), uint8(1), uint16(100))
	f.Add(tone, uint32(1000), uint8(1), uint16(7))
	f.Add(tone, uint32(100), uint8(6), uint16(1))
	f.Add([]byte{0xff, 0xff, 0x7f, 0x7f, 0, 0, 0xc0, 0x7f, 0, 0, 0x80, 0xff, 1, 0, 0, 0}, uint32(1), uint8(1), uint16(3))
	f.Add([]byte{}, uint32(768000), uint8(16), uint16(9))
	f.Fuzz(holds)
}

// holds checks what holds for any samples.
func holds(t *testing.T, raw []byte, rate uint32, channels uint8, cut uint16) {
	n := int(channels)%16 + 1
	format := audio.Format{Rate: int(rate) % 768001, Layout: audio.UsualLayout(n)}
	b := audio.NewBlock(n, len(raw)/4/n)
	for i := range b.Frames() * n {
		b[i%n][i/n] = math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:]))
	}
	d := New(format)
	d.Write(b)
	want, state := d.Finish()
	length := float64(b.Frames()) / float64(max(1, format.Rate))
	for _, fault := range want {
		if !(fault.At >= 0 && fault.Length >= 0 && fault.At <= length && fault.Length <= length*(1+1e-9)) || fault.Words == "" ||
			!slices.Contains([]Severity{Note, Doubt, Serious}, fault.Severity) || fault.Code == "" {
			t.Errorf("in %g s: %+v", length, fault)
		}
	}
	for _, v := range []float64{float64(state.HeadSilence), float64(state.TailSilence), float64(state.Correlation), float64(state.Balance), float64(state.Offset)} {
		if math.IsInf(v, 0) {
			t.Errorf("condition %+v", state)
		}
	}
	d, view := New(format), make(audio.Block, n)
	for at := 0; at < b.Frames(); {
		to := min(at+int(cut)%5000+1, b.Frames())
		d.Write(b.Cut(view, at, to))
		at = to
	}
	if got, _ := d.Finish(); !slices.Equal(got, want) {
		t.Errorf("in blocks %v, at once %v", got, want)
	}
}
