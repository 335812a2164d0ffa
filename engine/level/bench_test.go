package level

import (
	"context"
	"fmt"
	"os/exec"
	"path/filepath"
	"runtime"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// benchSource is over two minutes of music and read speech in turns, 44.1 kHz stereo, so that every
// stage has work to do.
func benchSource(b *testing.B) string {
	b.Helper()
	source := filepath.Join(b.TempDir(), "source.wav")
	args := []string{"-nostdin", "-y"}
	mix := ""
	for i := range 12 {
		in := music
		if i%2 == 1 {
			in = spoken
		}
		args = append(args, "-t", "15", "-i", in)
		mix += fmt.Sprintf("[%d]aresample=44100,aformat=channel_layouts=stereo[p%d];", i, i)
	}
	for i := range 12 {
		mix += fmt.Sprintf("[p%d]", i)
	}
	args = append(args, "-filter_complex", mix+"concat=n=12:v=0:a=1", "-c:a", "pcm_s24le", source)
	if out, err := exec.Command("ffmpeg", args...).CombinedOutput(); err != nil {
		b.Fatalf("ffmpeg: %v\n%s", err, out)
	}
	return source
}

// BenchmarkStages measures each stage, and all of them as one recording meets them, on one processor: times real
// time is how much faster than listening.
func BenchmarkStages(b *testing.B) {
	source, ctx := benchSource(b), context.Background()
	e := &Engine{Media: media.Find()}
	b.Cleanup(func() { runtime.GOMAXPROCS(runtime.GOMAXPROCS(1)) })
	for _, name := range []string{"talk", "rotation", "transmitter"} {
		task := Task{Profile: named(b, name)}
		j, _, err := e.begin(ctx, source, task)
		if err != nil {
			b.Fatal(err)
		}
		first := j.plan
		if err := j.foresee(ctx); err != nil {
			b.Fatal(err)
		}
		first.Gain, first.Limit = j.plan.Gain, true
		stage := func(stage string, work func() error) {
			b.Run(name+"/"+stage, func(b *testing.B) {
				runtime.GOMAXPROCS(1)
				for b.Loop() {
					if err := work(); err != nil {
						b.Fatal(err)
					}
				}
				b.ReportMetric(j.before.Duration*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
			})
		}
		analyse := func() error { _, err := e.Analyse(ctx, source, Options{}); return err }
		plan := func() error { _, err := MakePlan(task, j.before, Encoder{}); return err }
		render := func() error { _, err := j.predict(ctx, first); return err }
		stage("analyse", analyse)
		stage("plan", plan)
		stage("render", render)
		stage("core", func() error { // analyse, plan, two renders through ride, compressor, ceiling and meter
			for _, part := range []func() error{analyse, plan, render, render} {
				if err := part(); err != nil {
					return err
				}
			}
			return nil
		})
	}
	b.Run("whole", func(b *testing.B) { // with the file written and read back
		for b.Loop() {
			if _, err := e.Level(ctx, source, Task{Profile: named(b, "talk")}, source+".out"); err != nil {
				b.Fatal(err)
			}
		}
	})
}

// A plan's chain allocates nothing once it runs.
func TestSteadyStateDoesNotAllocate(t *testing.T) {
	p := named(t, "talk")
	a := reading(-30, -3)
	a.Channels, a.Info.Format = 2, audio.Format{Rate: 44100, Layout: audio.Stereo}
	plan, err := MakePlan(Task{Profile: p}, a, Encoder{})
	if err != nil {
		t.Fatal(err)
	}
	plan.Ride = &Ride{Gain: make([]float32, 1000)}
	for i := range plan.Ride.Gain {
		plan.Ride.Gain[i] = float32(i % 7)
	}
	plan.Limit = true
	c := newChain(a.Info.Format, plan)
	block := audio.NewBlock(2, audio.BlockFrames)
	for i := range block[0] {
		block[0][i], block[1][i] = float32(i%200)/200-0.5, float32(i%130)/130-0.5
	}
	c.process(block)
	// What was taken off is kept for every tenth of a second, in a slice that grows now and then.
	if n := testing.AllocsPerRun(500, func() { c.process(block) }); n >= 0.1 {
		t.Errorf("%g allocations a block", n)
	}
}
