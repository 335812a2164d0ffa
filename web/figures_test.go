package web

import (
	"math"
	"strings"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

func TestNumbers(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{audio.Number(-18, 1), "−18.0"}, {audio.Number(-0.04, 1), "0.0"}, {audio.Number(11.25, 1), "11.2"}, {signed(0.04), "0.0"}, {signed(3), "+3.0"}, {signed(-3), "−3.0"},
		{length(22320, true), "6 h 12 min"}, {length(204, true), "3 min 24 s"}, {length(8.16, true), "8.2 s"}, {length(59.7, true), "1 min 0 s"}, {length(0, false), "–"},
		{size(512), "512 bytes"}, {size(41_000_000), "41.0 MB"}, {plural(1, "job", "jobs"), "1 job"}, {plural(96, "job", "jobs"), "96 jobs"},
		{folder("a/b/c.wav"), "a/b/"}, {folder("c.wav"), ""},
	} {
		if got := strings.ReplaceAll(c.got, narrow, " "); got != c.want {
			t.Errorf("got %q, want %q", got, c.want)
		}
	}
}

func TestFigureTakesAnyFloat(t *testing.T) {
	var none *float64
	for _, v := range []any{none, math.Inf(-1), audio.LUFS(math.NaN()), nil} {
		if newFigure(v, "LUFS").Defined {
			t.Errorf("%v counts as defined", v)
		}
	}
	for _, v := range []any{new(-18.0), -18.0, audio.LUFS(-18)} {
		if f := newFigure(v, "LUFS"); f.Text != "−18.0" || f.Unit != "LUFS" {
			t.Errorf("%v is written %+v", v, f)
		}
	}
}

func TestWhen(t *testing.T) {
	for _, c := range []struct {
		t    any
		want string
	}{
		{noon.Add(-time.Hour), "today at 11:00"}, {noon.Add(-13 * time.Hour), "yesterday at 23:00"}, {noon.AddDate(0, -1, 0), "14 April at 12:00"},
		{noon.AddDate(-1, 0, 0), "14 May 2030"}, {(*time.Time)(nil), "–"}, {time.Time{}, "–"},
	} {
		if got := when(c.t, noon); got != c.want {
			t.Errorf("when(%v) = %q, want %q", c.t, got, c.want)
		}
	}
}

func TestTold(t *testing.T) {
	done := store.Recording{State: store.Done, Before: &store.Figures{}, After: &store.Figures{Integrated: new(-18.02)}}
	job := func(before, after float64, p level.Plan) *store.Job {
		return &store.Job{Plan: &p, Before: &store.Figures{Integrated: &before}, After: &store.Figures{Integrated: &after}}
	}
	planned := func(p level.Plan) *store.Job { return &store.Job{Plan: &p} }
	speech := job(-27, -17.4, level.Plan{Gain: 12, Ceiling: -1, Limit: true, Anchor: profile.Speech, Compressor: &dynamics.Compression{Ratio: 3}})
	speech.SpeechBefore, speech.SpeechAfter = new(-25.0), new(-16.0)
	copied, replacing := &store.Run{Delivery: store.Copy}, &store.Run{Delivery: store.Replace}
	for _, c := range []struct {
		r    store.Recording
		run  *store.Run
		job  *store.Job
		want string
	}{
		{done, copied, job(-29.32, -18.02, level.Plan{Gain: 11.3, Ceiling: -1, Limit: true}), "Lifted by 11.3 LU to −18.0 LUFS; peaks held under −1.0 dBTP."},
		{done, copied, job(-13.76, -18.02, level.Plan{Gain: -4.26}), "Lowered by 4.3 LU to −18.0 LUFS."},
		{done, copied, job(-27.02, -18.02, level.Plan{Gain: 12}), "Lifted by 9.0 LU to −18.0 LUFS, with a steady gain of +12.0 dB."},
		{done, copied, job(-20, -18.02, level.Plan{Gain: 1, Ride: &level.Ride{Least: -3, Most: 5}}), "Lifted by 2.0 LU to −18.0 LUFS, with a ride between −2.0 and +6.0 dB."},
		{done, copied, job(-18.02, -18.02, level.Plan{Gain: 1, Ride: &level.Ride{Least: -3, Most: 5}}), "Left at its level, −18.0 LUFS, with a ride between −2.0 and +6.0 dB."},
		{done, copied, speech, "Speech lifted by 9.0 LU to −16.0 LUFS, with a steady gain of +12.0 dB; compressed; peaks held under −1.0 dBTP."},
		{done, copied, planned(level.Plan{Gain: 11.3}), "Levelled with a steady gain of +11.3 dB."},
		{done, copied, planned(level.Plan{Untouched: true}), "Already within the profile: copied byte for byte, nothing changed."},
		{done, replacing, planned(level.Plan{Untouched: true}), "Already within the profile: kept byte for byte, nothing changed."},
		{done, copied, job(-18.03, -18.02, level.Plan{Gain: 0.01}), "Left at its level, −18.0 LUFS."},
		{done, &store.Run{Delivery: store.Measure}, nil, "Measured only; nothing was written."},
		{done, &store.Run{Delivery: store.Tags}, &store.Job{Reason: "gain tags written: −20.1 LUFS"}, "Gain tags written: −20.1 LUFS. The sound is as it was."},
		{done, &store.Run{Delivery: store.Tags}, &store.Job{Reason: "its gain tags are right already"}, "Its gain tags are right already. The sound is as it was."},
		{store.Recording{State: store.Failed, Reason: "there are no gain tags in wav"}, &store.Run{Delivery: store.Tags}, nil,
			"No gain tags could be written: there are no gain tags in wav. The file on the shelf is as it was."},
		{store.Recording{}, nil, nil, "Not measured yet: it waits for a first run."},
		{store.Recording{Path: "a/b.mp3", State: store.Failed, Reason: "the file is empty"}, copied, nil,
			"Could not be levelled: the file is empty. The file on the shelf is as it was."},
		{store.Recording{State: store.Done, Reason: "écho found."}, copied, nil, "Finished. Écho found."},
	} {
		if got := told(c.r, c.run, c.job); got != c.want {
			t.Errorf("told %q, want %q", got, c.want)
		}
	}
}

func TestRunPaceAndBar(t *testing.T) {
	start := noon.Add(-10 * time.Minute)
	v := viewRun(store.Run{State: store.RunWorking, Jobs: 100, Done: 48, Held: 1, Failed: 1, Working: 2, Waiting: 48, StartedAt: &start,
		SecondsDone: 20 * 3600, BytesDone: 500, BytesTotal: 1000}, noon)
	if v.Ended != 50 || v.Pace != "2.0 hours" || v.Left != "about 10 minutes left" {
		t.Errorf("ended %d, pace %q, %q", v.Ended, v.Pace, v.Left)
	}
	jobs := 0
	for _, p := range v.Parts {
		jobs += p.Jobs
	}
	if jobs != 100 {
		t.Errorf("the bar holds %d of 100 jobs", jobs)
	}
	if v = viewRun(store.Run{State: store.RunWaiting}, noon); v.Pace != "" || v.Left != "" {
		t.Errorf("a run that has not begun foretells %q, %q", v.Pace, v.Left)
	}
}

func TestSpreadIsNeverNone(t *testing.T) {
	for v, want := range map[float64]string{0: "less than 0.1", 0.049: "less than 0.1", 0.05: "0.1", 37.2: "37.2"} {
		if got := spreadWords(v); got != want {
			t.Errorf("%g is %q, want %q", v, got, want)
		}
	}
}
