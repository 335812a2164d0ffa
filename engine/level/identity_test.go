package level

import (
	"testing"

	"evenshelf/engine/audio"
)

// The hash goes by the sound alone: not by how it is cut into blocks, but by every sample, its channel and its rate.
func TestFingerprint(t *testing.T) {
	format := audio.Format{Rate: 44100, Layout: audio.UsualLayout(2)}
	sum := func(f audio.Format, cut int, x audio.Block) string {
		p := newFingerprint(f)
		for at := 0; at < x.Frames(); at += cut {
			part := make(audio.Block, len(x))
			for c := range x {
				part[c] = x[c][at:min(at+cut, len(x[c]))]
			}
			p.write(part)
		}
		return p.sum()
	}
	x := audio.NewBlock(2, 10_000)
	for i := range x[0] {
		x[0][i], x[1][i] = float32(i)/20_000, -float32(i)/30_000
	}
	want := sum(format, 10_000, x)
	if len(want) != 32 {
		t.Errorf("%q", want)
	}
	for _, cut := range []int{1, 7, 4096} {
		if got := sum(format, cut, x); got != want {
			t.Errorf("in blocks of %d: %s, want %s", cut, got, want)
		}
	}
	other := map[string]string{
		"channels swapped": sum(format, 4096, audio.Block{x[1], x[0]}),
		"another rate":     sum(audio.Format{Rate: 48000, Layout: format.Layout}, 4096, x),
		"one channel":      sum(audio.Format{Rate: 44100, Layout: audio.UsualLayout(1)}, 4096, x[:1]),
		"one frame less":   sum(format, 4096, audio.Block{x[0][:9_999], x[1][:9_999]}),
	}
	x[1][9_999] += 0x1p-24
	other["one bit"] = sum(format, 4096, x)
	seen := map[string]string{want: "the sound itself"}
	for name, got := range other {
		if was, there := seen[got]; there {
			t.Errorf("%s and %s have one hash", name, was)
		}
		seen[got] = name
	}
}
