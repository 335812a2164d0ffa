package speech

import (
	"encoding/binary"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// Whatever comes in, at whatever rate and in whatever blocks, the course is as long as the recording and its
// likelihoods are likelihoods.
func FuzzDetector(f *testing.F) {
	f.Add([]byte{}, uint8(1), uint16(1), uint32(44100))
	f.Add([]byte{0, 0, 0x80, 0x7f, 0, 0, 0xc0, 0x7f, 1, 0, 0, 0, 0xff, 0xff, 0x7f, 0x7f}, uint8(2), uint16(3), uint32(8000))
	f.Add(make([]byte, 4000), uint8(6), uint16(100), uint32(1))
	f.Add([]byte("some text that makes numbers of all sizes and signs, as bytes do, when they are read as floats"), uint8(3), uint16(2), uint32(384000))
	f.Fuzz(func(t *testing.T, raw []byte, channels uint8, cut uint16, rate uint32) {
		layout := audio.UsualLayout(int(channels)%12 + 1)
		hz := int(rate%400000) + 1
		const most = 1 << 18 // frames; what is there is repeated up to a second or so
		n := len(raw) / 4
		if n == 0 {
			n = 1
			raw = make([]byte, 4)
		}
		total := min(most, hz+int(cut))
		b := audio.NewBlock(layout.Channels, total)
		for i := range total {
			for c := range b {
				k := (i*layout.Channels + c) % n
				b[c][i] = math.Float32frombits(binary.LittleEndian.Uint32(raw[4*k:]))
			}
		}
		d, view := New(audio.Format{Rate: hz, Layout: layout}), make(audio.Block, layout.Channels)
		step := int(cut)%5000 + 1
		for at := 0; at < total; at += step {
			d.Write(b.Cut(view, at, min(at+step, total)))
		}
		c := d.Finish()
		want := 0
		for math.Round(float64(want)*float64(hz)/StepsPerSecond) < float64(total) {
			want++
		}
		if len(c.Active) != want || len(c.Speech) != want {
			t.Fatalf("%d frames at %d Hz make %d and %d steps, want %d", total, hz, len(c.Active), len(c.Speech), want)
		}
		for i, p := range c.Speech {
			if !(p >= 0 && p <= 1) || p > 0 && !c.Active[i] {
				t.Fatalf("step %d, active %v, has likelihood %v", i, c.Active[i], p)
			}
		}
	})
}
