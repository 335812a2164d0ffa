package store

import (
	"errors"
	"math"
	"reflect"
	"slices"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/ride"
	"evenshelf/migrations"
)

// ridden is an outcome with everything in it, after an hour's ride.
func ridden() level.Outcome {
	o := done(-30, -18)
	curve := make(ride.Curve, 36001)
	for i := range curve {
		curve[i] = float32(10 * math.Sin(float64(i)/300))
	}
	o.Plan = &level.Plan{Anchor: profile.Speech, Anchored: -29.5, Aim: -18, Gain: 4.5, Ceiling: -1, Limit: true, Reason: "ridden",
		Ride: &level.Ride{Speed: profile.Medium, Kept: 0.3, Range: 6.2, Least: -9.8, Most: 9.9, Gain: curve}}
	o.Treatment = &level.Treatment{Limited1: 0.031, Limited3: 0.004, Compressed: 2.3, Deepest: 5.2, DeepestAt: 83.4, Order: audio.Ratio(audio.Undefined)}
	foreseen := meter.Unmeasured()
	foreseen.Integrated, foreseen.TruePeak = -18.01, -1.02
	o.Foreseen = &foreseen
	at := audio.Seconds(83.4)
	o.Verdict = level.Verdict{State: level.Held, Reason: "limited too hard; the whole of it is noisy",
		Doubts: []level.Doubt{{Code: "limiting", Words: "limited too hard", At: &at}, {Code: "noise", Words: "the whole of it is noisy"}}}
	return o
}

func TestJobTellsWhatWasDone(t *testing.T) {
	f := open(t)
	id := f.found("a.wav")["a.wav"].ID
	run, jobs := f.run(Copy)
	f.start(jobs[0])
	want := ridden()
	f.finish(jobs[0], want, "_held/a.wav")

	job, err := f.Job(f.ctx, jobs[0])
	if err != nil {
		t.Fatal(err)
	}
	list, err := f.Jobs(f.ctx, JobQuery{RunID: run.ID})
	if err != nil || !reflect.DeepEqual(list[0].Plan, job.Plan) {
		t.Errorf("the list tells %+v (%v), the job %+v", list, err, job)
	}
	if job.Plan.Ride.Gain != nil || job.Plan.Ride.Most != 9.9 || job.Plan.Ride.Speed != profile.Medium {
		t.Errorf("ride in a list: %+v", job.Plan.Ride)
	}
	var bytes int
	if err := f.writer.QueryRow(`SELECT length(plan) FROM jobs`).Scan(&bytes); err != nil || bytes > 2000 {
		t.Errorf("the row of a job has a plan of %d bytes (%v)", bytes, err)
	}
	if !reflect.DeepEqual(job.Doubts, want.Verdict.Doubts) {
		t.Errorf("doubts: %+v", job.Doubts)
	}
	if tr := job.Treatment; tr == nil || tr.Limited1 != 0.031 || tr.DeepestAt != 83.4 || tr.Compressed != 2.3 || audio.Defined(tr.Order) {
		t.Errorf("treatment: %+v", tr)
	}
	near(t, "speech before", job.SpeechBefore, -29)
	near(t, "speech after", list[0].SpeechAfter, -17)
	near(t, "foreseen", job.Foreseen.Integrated, -18.01)
	if job.Foreseen.Range != nil {
		t.Errorf("a range out of nothing: %v", *job.Foreseen.Range)
	}

	whole, err := f.Plan(f.ctx, jobs[0])
	if err != nil {
		t.Fatal(err)
	}
	if len(whole.Ride.Gain) != len(want.Plan.Ride.Gain) || whole.Gain != 4.5 {
		t.Fatalf("%d values of %d", len(whole.Ride.Gain), len(want.Plan.Ride.Gain))
	}
	for i, w := range want.Plan.Ride.Gain {
		// How finely a curve says itself is its own matter (engine/ride); a hundredth of a dB is what nobody hears.
		if math.Abs(float64(whole.Ride.Gain[i]-w)) > 0.01 {
			t.Fatalf("value %d is %v, want %v", i, whole.Ride.Gain[i], w)
		}
	}
	why, err := f.HeldFor(f.ctx, []int64{id, 99})
	if err != nil || len(why) != 1 || !reflect.DeepEqual(why[id], want.Verdict.Doubts) {
		t.Errorf("held for %+v: %v", why, err)
	}
	if _, err := f.Plan(f.ctx, 99); !errors.Is(err, ErrNotFound) {
		t.Errorf("the plan of no job: %v", err)
	}
}

// What a job did not do, and what is not held, has nothing to tell.
func TestJobWithNothingToTell(t *testing.T) {
	f := open(t)
	id := f.found("a.wav")["a.wav"].ID
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], failed("no sound in it"), "")
	job, err := f.Job(f.ctx, jobs[0])
	if err != nil || job.Plan != nil || job.Treatment != nil || job.Foreseen != nil || job.Doubts == nil || len(job.Doubts) > 0 {
		t.Errorf("%+v %v", job, err)
	}
	if p, err := f.Plan(f.ctx, jobs[0]); p != nil || err != nil {
		t.Errorf("%+v %v", p, err)
	}
	if why, err := f.HeldFor(f.ctx, []int64{id}); err != nil || len(why) > 0 {
		t.Errorf("held for %+v: %v", why, err)
	}
}

// secondPlan is a plan as engine 2 wrote it.
const secondPlan = `{"gain_db":4.5,"ceiling_dbtp":-1,"limit":true,"untouched":false,"reason":"lifted"}`

func TestJobOfTheSecondEngine(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], ridden(), "_held/a.wav")
	ours, err := ourMigrations(f.writer, migrations.SQLite)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := ours.DownTo(f.ctx, 2); err != nil {
		t.Fatal(err)
	}
	if _, err := f.writer.Exec(`UPDATE jobs SET plan = ?`, secondPlan); err != nil {
		t.Fatal(err)
	}
	f.Close()
	f.reopen()
	job, err := f.Job(f.ctx, jobs[0])
	if err != nil {
		t.Fatal(err)
	}
	if p := job.Plan; p.Gain != 4.5 || !p.Limit || p.Anchor != profile.Programme || audio.Defined(p.Anchored) || audio.Defined(p.Aim) || p.Ride != nil || p.Compressor != nil {
		t.Errorf("plan: %+v", p)
	}
	if job.Treatment != nil || job.Foreseen != nil || job.Doubts == nil || len(job.Doubts) > 0 || job.SameAs != 0 || job.After == nil {
		t.Errorf("%+v", job)
	}
	if p, err := f.Plan(f.ctx, jobs[0]); err != nil || p.Gain != 4.5 {
		t.Errorf("%+v %v", p, err)
	}
}

// A result that still stands is told again, whatever was done in between, and by whatever job it is asked for.
func TestFinishSame(t *testing.T) {
	f := open(t)
	id := f.found("a.wav", "b.wav")["a.wav"].ID
	_, first := f.run(Replace)
	f.start(first[0])
	o := ridden()
	o.Verdict = level.Verdict{State: level.Done}
	f.finish(first[0], o, "a.wav")
	if ok, err := f.Stands(f.ctx, first[0], someProfile(t).Version()); err != nil || !ok {
		t.Errorf("stands: %v %v", ok, err)
	}
	_, copied := f.run(Copy)
	f.start(copied[0])
	f.finish(copied[0], done(-29, -23), "a.wav")
	earlier := first[0]
	for range 2 {
		run, jobs := f.run(Replace)
		f.start(jobs[0])
		if err := f.FinishSame(f.ctx, jobs[0], earlier, "levelled already", nil); err != nil {
			t.Fatal(err)
		}
		job, err := f.Job(f.ctx, jobs[0])
		if err != nil || job.State != Done || job.SameAs != first[0] || job.Reason != "levelled already" || job.Output != "a.wav" || job.Renders != 0 ||
			job.Plan.Ride.Most != 9.9 || job.Treatment == nil || job.Duration == nil {
			t.Errorf("%+v %v", job, err)
		}
		near(t, "before", job.Before.Integrated, -30)
		near(t, "after", job.After.Integrated, -18)
		r := f.byPath()["a.wav"]
		if r.State != Done || r.Reason != "levelled already" || r.JobID != jobs[0] {
			t.Errorf("%+v", r)
		}
		near(t, "before on the recording", r.Before.Integrated, -30)
		near(t, "after on the recording", r.After.Integrated, -18)
		if _, after, err := f.Readings(f.ctx, id); err != nil || after.JobID != first[0] {
			t.Errorf("%+v %v", after, err)
		}
		if p, err := f.Plan(f.ctx, jobs[0]); err != nil || len(p.Ride.Gain) != 36001 {
			t.Errorf("plan: %v", err)
		}
		if got := f.getRun(run.ID); got.Done != 1 || got.SecondsDone != 90 || !slices.Contains(whats(f.events(run.ID)), "done") {
			t.Errorf("%+v", got)
		}
		// Not of another recording's job, nor of one that is not there.
		f.start(jobs[1])
		for _, other := range []int64{first[0], 99} {
			if err := f.FinishSame(f.ctx, jobs[1], other, "", nil); !errors.Is(err, ErrNotFound) {
				t.Errorf("as job %d: %v", other, err)
			}
		}
		earlier = jobs[0]
	}
}

func TestStandsOnlyWhatWouldComeOutAgain(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav", "d.wav")
	_, jobs := f.run(Replace)
	old := done(-30, -18)
	old.After.Engine = "0"
	for i, o := range []level.Outcome{done(-30, -18), old, held("doubtful")} {
		f.start(jobs[i])
		f.finish(jobs[i], o, "x.wav")
	}
	f.start(jobs[3])
	version := someProfile(t).Version()
	for i, want := range []bool{true, false, false, false} {
		if ok, err := f.Stands(f.ctx, jobs[i], version); err != nil || ok != want {
			t.Errorf("job %d: %v %v", i, ok, err)
		}
	}
	if ok, err := f.Stands(f.ctx, jobs[0], "another"); err != nil || ok {
		t.Errorf("another profile: %v %v", ok, err)
	}
}

// What a treatment of earlier did not note is not said to be none; nor is a speech that nobody measured.
func TestOldTreatmentSaysNothingOfTheCompressor(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], ridden(), "a.wav")
	for _, change := range []string{`UPDATE jobs SET treatment = json_remove(treatment, '$.compressed_db')`, `UPDATE readings SET detail = json_remove(detail, '$.speech_lufs')`} {
		if _, err := f.writer.ExecContext(f.ctx, change); err != nil {
			t.Fatal(err)
		}
	}
	job, err := f.Job(f.ctx, jobs[0])
	if err != nil || audio.Defined(job.Treatment.Compressed) || job.Treatment.Limited1 != 0.031 || job.SpeechBefore != nil || job.SpeechAfter != nil {
		t.Errorf("%+v, %v, %v, %v", job.Treatment, job.SpeechBefore, job.SpeechAfter, err)
	}
}
