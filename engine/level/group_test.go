package level

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// An album of a loud and a soft piece: as one programme it is at the target, the balance between the two is what it
// was, and neither passes the ceiling. FFmpeg's meter reads the two files, one after the other, as one.
func TestGroupSharesOneGain(t *testing.T) {
	dir := t.TempDir()
	paths := []string{excerpt(t, dir, "soft.wav", 0.1, "-c:a", "pcm_s24le"), excerpt(t, dir, "loud.wav", 0.7, "-c:a", "pcm_s24le")}
	e, ctx := &Engine{Media: media.Find()}, context.Background()
	p := named(t, "untouched")
	p.Group, p.Target = profile.Folder, -23
	cut := filepath.Join(dir, "cut.wav") // at full scale, and breaking off: neither its loudness nor its peaks count
	whole := readFile(t, excerpt(t, dir, "whole.wav", 3, "-c:a", "pcm_s24le"))
	if err := os.WriteFile(cut, whole[:len(whole)/2], 0o644); err != nil {
		t.Fatal(err)
	}
	shared, err := e.Group(ctx, append(paths, filepath.Join(dir, "missing.wav"), cut), OptionsFor(p))
	if err != nil {
		t.Fatal(err)
	}
	var outcomes []Outcome
	var copies []string
	for _, path := range paths {
		target := path + ".copy"
		o, err := e.Level(ctx, path, Task{Profile: p, Shared: &shared}, target)
		if err != nil || o.Verdict.State != Done {
			t.Fatalf("%v: %v", o.Verdict, err)
		}
		outcomes, copies = append(outcomes, o), append(copies, target)
	}
	if a, b := outcomes[0].Plan.Gain, outcomes[1].Plan.Gain; a != b {
		t.Errorf("gains of %.3f and %.3f dB", a, b)
	}
	all := filepath.Join(dir, "all.wav")
	ffmpeg(t, nil, "-i", copies[0], "-i", copies[1], "-filter_complex", "concat=n=2:v=0:a=1", "-c:a", "pcm_s24le", all)
	if together, _ := secondOpinion(t, all); math.Abs(float64(together+23)) > 0.15 { // it gives tenths
		t.Errorf("the album is at %.1f LUFS", together)
	}
	again, err := e.Group(ctx, copies, OptionsFor(p))
	if err != nil {
		t.Fatal(err)
	}
	if o, err := e.Level(ctx, copies[0], Task{Profile: p, Shared: &again}, all); err != nil || !o.Plan.Untouched {
		t.Errorf("levelling the album again: %q, %v", o.Plan.Reason, err)
	}

	// Where the peaks allow less, they do so for all.
	p.Target = -10
	o, err := e.Level(ctx, paths[0], Task{Profile: p, Shared: &shared}, all)
	if err != nil || o.Verdict.State != Done {
		t.Fatalf("%v: %v", o.Verdict, err)
	}
	if want := audio.DB(p.Ceiling - shared.TruePeak); math.Abs(float64(o.Plan.Gain-want)) > 1e-4 {
		t.Errorf("a gain of %.2f dB, the loudest peak of the group allows %.2f", o.Plan.Gain, want)
	}
}
