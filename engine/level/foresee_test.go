package level

import (
	"context"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// What is foreseen without writing anything is what comes out, to 0.1 LU, with every profile, and it agrees with an
// outside meter (FFmpeg's, which reports tenths) on the file.
func TestForeseenIsWhatComesOut(t *testing.T) {
	dir := t.TempDir()
	loud, soft := excerpt(t, dir, "loud.wav", 2, "-c:a", "pcm_s24le"), excerpt(t, dir, "soft.flac", 0.03)
	e, ctx := &Engine{Media: media.Find()}, context.Background()
	for _, p := range profile.Builtin() {
		for _, source := range []string{loud, soft, spoken} {
			t.Run(p.Name+"/"+filepath.Base(source), func(t *testing.T) {
				dir := t.TempDir()
				foreseen, err := e.Foresee(ctx, source, Task{Profile: p})
				if err != nil {
					t.Fatal(err)
				}
				if left, _ := os.ReadDir(dir); len(left) > 0 || foreseen.After != nil {
					t.Errorf("a dry run wrote something: %v, %v", left, foreseen.After)
				}
				target := filepath.Join(dir, "copy")
				o, err := e.Level(ctx, source, Task{Profile: p}, target)
				if err != nil {
					t.Fatal(err)
				}
				if off := math.Abs(float64(foreseen.Foreseen.Integrated - o.After.Integrated)); !(off <= 0.1) {
					t.Errorf("%.2f LUFS were foreseen, %.2f came out", foreseen.Foreseen.Integrated, o.After.Integrated)
				}
				if off := math.Abs(float64(foreseen.Foreseen.TruePeak - o.After.TruePeak)); !(off <= 0.1) {
					t.Errorf("%.2f dBTP were foreseen, %.2f came out", foreseen.Foreseen.TruePeak, o.After.TruePeak)
				}
				if foreseen.Verdict.State != o.Verdict.State || foreseen.Verdict.Reason != o.Verdict.Reason {
					t.Errorf("the verdict foreseen is %v, it is %v", foreseen.Verdict, o.Verdict)
				}
				if o.After.Channels == 1 && p.Mono == audio.TwoLoudspeakers {
					return // which the outside meter does not know
				}
				if second, _ := secondOpinion(t, target); math.Abs(float64(second-o.After.Integrated)) > 0.15 { // it gives tenths
					t.Errorf("we read %.2f LUFS, the outside meter %.1f", o.After.Integrated, second)
				}
			})
		}
	}
}

// A plan that was kept as JSON renders the same bytes again.
func TestStoredPlanRendersTheSameBytes(t *testing.T) {
	source := excerpt(t, t.TempDir(), "x.wav", 0.1, "-c:a", "pcm_s24le")
	e, ctx := &Engine{Media: media.Find()}, context.Background()
	for _, name := range []string{"talk", "transmitter"} {
		j, _, err := e.begin(ctx, source, Task{Profile: named(t, name)})
		if err != nil {
			t.Fatal(err)
		}
		if err := j.foresee(ctx); err != nil {
			t.Fatal(err)
		}
		if j.plan.Ride == nil { // whatever the ride thinks of this music, there is one to be kept
			j.plan.Ride = &Ride{Gain: make([]float32, len(j.before.Timeline.Level)+1)}
			for i := range j.plan.Ride.Gain {
				j.plan.Ride.Gain[i] = float32(math.Round(100*math.Sin(float64(i)/20))) / 100
			}
		}
		again := throughJSON(t, j.plan)
		if want, got := rendered(t, e, source, j.plan), rendered(t, e, source, again); !slices.Equal(want, got) {
			t.Errorf("%s: a stored plan renders something else", name)
		}
	}
}

// throughJSON is a plan after it has been kept.
func throughJSON(t *testing.T, plan Plan) (again Plan) {
	t.Helper()
	b, err := json.Marshal(plan)
	if err == nil {
		err = json.Unmarshal(b, &again)
	}
	if err != nil {
		t.Fatal(err)
	}
	return again
}

// rendered is the first channel that a plan makes of a file.
func rendered(t *testing.T, e *Engine, source string, plan Plan) []float32 {
	t.Helper()
	src, err := e.Media.Open(context.Background(), source)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	got := &kept{}
	if _, err := Render(context.Background(), src, plan, got); err != nil {
		t.Fatal(err)
	}
	return got.x
}
