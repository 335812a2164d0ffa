package level

import (
	"context"
	"path/filepath"
	"reflect"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// One voice in two channels comes out the same, bit for bit, whether one of them is worked on or both: the sound, what
// was taken off, and the reading that is foreseen.
func TestEqualChannelsAreRenderedAsOne(t *testing.T) {
	dir, e, ctx := t.TempDir(), &Engine{Media: media.Find()}, context.Background()
	source := filepath.Join(dir, "x.flac")
	ffmpeg(t, nil, "-i", spoken, "-ar", "44100", "-ac", "2", source)
	for _, name := range []string{"talk", "transmitter", "untouched"} {
		j, _, err := e.begin(ctx, source, Task{Profile: named(t, name)})
		if err != nil {
			t.Fatal(err)
		}
		defer j.sound.close()
		one := j.plan
		one.Gain, one.Limit = one.Gain+6, j.mayLimit() // the ceiling has something to do
		two := one
		two.alike = false
		a, err := j.predict(ctx, one)
		if err != nil {
			t.Fatal(err)
		}
		b, err := j.predict(ctx, two)
		if err != nil {
			t.Fatal(err)
		}
		if !one.alike || !reflect.DeepEqual(a, b) {
			t.Errorf("%s: alike %v: foreseen as one\n%+v\nas two\n%+v", name, one.alike, a.Reading, b.Reading)
		}
		if depth, _ := deepest(a.work.Limited); one.Limit && depth == 0 {
			t.Errorf("%s: the ceiling has nothing to do", name)
		}
		if x, y := everyChannel(t, j, one), everyChannel(t, j, two); !reflect.DeepEqual(x, y) || len(x) != 2 || len(x[0]) == 0 {
			t.Errorf("%s: as one it comes out otherwise", name)
		}
	}
}

// Two channels that differ in one sample are two, and so are channels that have no place left and right.
func TestChannelsThatAreNotAlike(t *testing.T) {
	b := audio.NewBlock(2, 100)
	for i := range b[0] {
		b[0][i], b[1][i] = float32(i)/200, float32(i)/200
	}
	alike := func(l audio.Layout) bool {
		p := newFingerprint(audio.Format{Rate: 44100, Layout: l})
		p.write(b)
		return p.alike()
	}
	if !alike(audio.Stereo) || alike(audio.Layout{Channels: 2}) {
		t.Error("left and right are the same; of others nothing is known")
	}
	if b[1][99] = 0; alike(audio.Stereo) {
		t.Error("they differ in the last sample")
	}
}

// everyChannel is what a plan makes of a turn's source.
func everyChannel(t *testing.T, j *turn, plan Plan) audio.Block {
	t.Helper()
	src, done, err := j.open(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	defer done()
	out := make(collected, 2)
	if _, err := Render(context.Background(), src, plan, out); err != nil {
		t.Fatal(err)
	}
	return audio.Block(out)
}

// collected keeps what is written to it.
type collected audio.Block

func (c collected) WriteBlock(b audio.Block) error {
	for i, x := range b {
		c[i] = append(c[i], x...)
	}
	return nil
}
func (c collected) Close() error { return nil }
