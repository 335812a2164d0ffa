package level

import (
	"context"
	"errors"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// An MP3 encoder can answer a tenth of a decibel with half of one. The rendering that came closest is
// delivered, not the last; which one that is, is found here by making them all.
func TestClosestRenderingIsDelivered(t *testing.T) {
	dir := t.TempDir()
	wav, source := filepath.Join(dir, "x.wav"), filepath.Join(dir, "x.mp3")
	out, err := exec.Command("sox", "-V1", "-R", "-n", "-r", "48000", "-b", "16", "-c", "2", wav,
		"synth", "12", "pinknoise", "vol", "0.4", "tremolo", "0.3", "70").CombinedOutput()
	if err != nil {
		t.Fatalf("this test needs Debian's sox: %v\n%s", err, out)
	}
	ffmpeg(t, nil, "-i", wav, "-b:a", "192k", source)

	e, ctx, p, scratch := &Engine{Media: media.Find()}, context.Background(), named(t, "rotation"), filepath.Join(dir, "x")
	p.Tolerance = 0.05 // or the first would be near enough
	j, _, err := e.begin(ctx, source, Task{Profile: p})
	if err != nil {
		t.Fatal(err)
	}
	if err := j.foresee(ctx); err != nil {
		t.Fatal(err)
	}
	best, last, plan := math.Inf(1), 0.0, j.plan
	for more, n := true, 1; more && n <= mostRenders; n++ {
		after, _, err := j.render(ctx, plan, scratch)
		if err != nil {
			t.Fatal(err)
		}
		last = math.Abs(float64(after.Integrated - p.Target))
		t.Logf("rendering %d: %.3f LU off", n, last)
		best = min(best, last)
		plan, more = j.again(plan, after, n)
	}
	if last == best {
		t.Fatal("the last rendering is the closest: the test proves nothing")
	}
	o, err := e.Level(ctx, source, Task{Profile: p}, scratch)
	if err != nil {
		t.Fatal(err)
	}
	if got := math.Abs(float64(o.After.Integrated - p.Target)); got != best {
		t.Errorf("%.3f LU off the target, the closest of all was %.3f", got, best)
	}
	again, err := e.Analyse(ctx, scratch, Options{})
	if err != nil || again.Integrated != o.After.Integrated {
		t.Errorf("the file there is not the one that was measured: %v, %v, %v", again.Integrated, o.After.Integrated, err)
	}
}

func TestCloser(t *testing.T) {
	j := &turn{task: Task{Profile: named(t, "rotation")}, plan: Plan{Aim: -18}} // −18 LUFS, −1 dBTP
	for _, c := range []struct {
		a, b *Analysis
		want bool
	}{
		{reading(-18.1, -2), reading(-17.7, -2), true},
		{reading(-17.7, -2), reading(-18.1, -2), false},
		{reading(-18.2, -1), reading(-18, -0.5), true},    // over the ceiling is worse than any distance
		{reading(-18, -0.98), reading(-18.1, -5), false},  // over is over while there is a rendering that is not
		{reading(-18, -0.995), reading(-18.1, -5), true},  // rounding is not
		{reading(-18, -0.5), reading(-18.1, -0.9), false}, // less over goes before closer
		{reading(-18, -2), reading(-18, -3), false},
	} {
		if got := j.closer(c.a, c.b); got != c.want {
			t.Errorf("%.2f LUFS %.2f dBTP against %.2f LUFS %.2f dBTP: %v", c.a.Integrated, c.a.TruePeak, c.b.Integrated, c.b.TruePeak, got)
		}
	}
}

// Infinite samples and what is not a number are silence in the copy, as they are to the meter, whether
// the ceiling works or not.
func TestNonFiniteSamplesAreNotDelivered(t *testing.T) {
	for _, limit := range []bool{false, true} {
		src := &given{sound: audio.NewBlock(1, 20_000)}
		for i := range src.sound[0] {
			src.sound[0][i] = float32(0.5 * math.Sin(float64(i)/10))
		}
		copy(src.sound[0][1000:], []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1)), math.MaxFloat32})
		got := &kept{}
		if _, err := Render(context.Background(), src, Plan{Gain: 8, Ceiling: -1, Limit: limit}, got); err != nil {
			t.Fatal(err)
		}
		if len(got.x) != 20_000 {
			t.Fatalf("%d frames", len(got.x))
		}
		for i, v := range got.x {
			if math.IsNaN(float64(v)) || math.IsInf(float64(v), 0) {
				t.Fatalf("limit %v: sample %d is %v", limit, i, v)
			}
		}
	}
}

// given is a source of a sound at hand, kept a sink that keeps it.
type given struct {
	sound audio.Block
	at    int
}

func (g *given) Format() audio.Format { return audio.Format{Rate: 48000, Layout: audio.Mono} }

func (g *given) ReadBlock(dst audio.Block) (int, error) {
	n := copy(dst[0], g.sound[0][g.at:])
	if g.at += n; n == 0 {
		return 0, io.EOF
	}
	if g.at == g.sound.Frames() {
		return n, io.EOF
	}
	return n, nil
}

type kept struct{ x []float32 }

func (k *kept) WriteBlock(b audio.Block) error { k.x = append(k.x, b[0]...); return nil }
func (k *kept) Close() error                   { return nil }

// FFmpeg killed in the middle, as by a system short of memory, is no fault of the recording: the error says
// so once and leaves nothing behind, whichever child it was.
func TestKilledFFmpegIsAnError(t *testing.T) {
	dir := t.TempDir()
	source := filepath.Join(dir, "x.mp3")
	ffmpeg(t, nil, "-f", "lavfi", "-i", "anoisesrc=d=200:r=44100:a=0.1", source)
	e := &Engine{Media: media.Find()}
	for _, pipe := range []string{"pipe:1", "pipe:0"} { // what decodes writes to the first, what encodes reads the other
		target := filepath.Join(dir, "x.out")
		ctx, stop := context.WithCancel(context.Background())
		killed := make(chan bool)
		go func() {
			done := false
			for !done && ctx.Err() == nil {
				done = killChild(pipe)
			}
			killed <- done
		}()
		_, err := e.Level(context.Background(), source, Task{Profile: named(t, "rotation")}, target)
		stop()
		if !<-killed {
			t.Fatalf("%s: there was nothing to kill: the test proves nothing", pipe)
		}
		if !errors.Is(err, media.ErrKilled) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v", pipe, err)
		}
		if _, err := os.Stat(target); err == nil {
			t.Errorf("%s: a scratch file is left behind", pipe)
		}
	}
}

// killChild kills one process that this one has started and whose command line has a word.
func killChild(word string) bool {
	lists, _ := filepath.Glob("/proc/self/task/*/children")
	for _, list := range lists {
		ids, _ := os.ReadFile(list) // a thread may have ended
		for _, id := range strings.Fields(string(ids)) {
			line, _ := os.ReadFile("/proc/" + id + "/cmdline")
			n, err := strconv.Atoi(id)
			if err == nil && strings.Contains(string(line), word) && syscall.Kill(n, syscall.SIGKILL) == nil {
				return true
			}
		}
	}
	return false
}
