package store

import (
	"encoding/json"
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/migrations"
)

func TestReadingsAndTimeline(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	o := done(-30, -18)
	o.After.Range, o.After.ShortTerm10 = audio.LU(audio.Undefined), audio.LUFS(math.Inf(-1))
	f.finish(jobs[0], o, "a.wav")
	r := f.byPath()["a.wav"]
	if r.After.Range != nil || r.After.ShortTerm10 != nil {
		t.Errorf("figures that are not defined: %+v", r.After)
	}
	before, after, err := f.Readings(f.ctx, r.ID)
	if err != nil {
		t.Fatal(err)
	}
	if before.Kind != "before" || before.JobID != jobs[0] || before.Integrated != -30 || before.Decoder != "invented 1" || len(before.Faults) != 1 {
		t.Errorf("before: %+v", before)
	}
	if before.MonoRule != audio.TwoLoudspeakers || before.Correlation != 0.93 || before.SpeechTime != 0.1 || before.MinPSR != 8 {
		t.Errorf("before: %+v", before)
	}
	if audio.Defined(after.Range) || after.Integrated != -18 {
		t.Errorf("after: %+v", after)
	}
	if b, err := json.Marshal(after); err != nil || !json.Valid(b) {
		t.Errorf("a reading must go out as JSON: %v", err)
	}
	line, err := f.Timeline(f.ctx, before.ID)
	if err != nil {
		t.Fatal(err)
	}
	inf := float32(math.Inf(-1))
	if line.Step != 0.1 || !slices.Equal(line.Momentary, []float32{inf, -23.46, -20}) || !slices.Equal(line.ShortTerm, []float32{inf, -30, -25}) ||
		!slices.Equal(line.Peak, []float32{inf, -6.1, 0}) || !slices.Equal(line.Active, []bool{false, true, true}) || !slices.Equal(line.Speech, []float32{0, 0.49, 0.87}) {
		t.Errorf("timeline: %+v", line)
	}
}

// firstDetail is a reading as engine 1 wrote it.
const firstDetail = `{"format":"wav","sample_rate_hz":48000,"channels":1,"frames":4320000,"duration_s":90,"integrated_lufs":-30,
	"loudness_range_lu":7.25,"max_momentary_lufs":-24,"max_short_term_lufs":-25,"short_term_p10_lufs":-35,"short_term_p50_lufs":-30,
	"short_term_p95_lufs":-26,"true_peak_dbtp":-18,"sample_peak_dbfs":-18.5,"plr_lu":12,"decoder":"invented 1","engine":"1","faults":[]}`

// A database of the first schema with a reading of the first engine: what was known then is still there, what was
// not is unknown now, and not 0.
func TestReadingOfTheFirstEngine(t *testing.T) {
	f := open(t)
	id := f.found("a.wav")["a.wav"].ID
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], done(-30, -18), "a.wav")
	ours, err := ourMigrations(f.writer, migrations.SQLite)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := ours.DownTo(f.ctx, 1); err != nil {
		t.Fatal(err)
	}
	if _, err := f.writer.Exec(`UPDATE readings SET engine = '1', detail = ?`, firstDetail); err != nil {
		t.Fatal(err)
	}
	f.Close()
	f.reopen()
	r, _, err := f.Readings(f.ctx, id)
	if err != nil {
		t.Fatal(err)
	}
	if r.Engine != "1" || r.Integrated != -30 || r.PLR != 12 || r.Channels != 1 || r.MonoRule != audio.OneChannel {
		t.Errorf("what engine 1 knew: %+v", r.Analysis)
	}
	var fields map[string]any
	if b, err := json.Marshal(r); err != nil {
		t.Fatal(err)
	} else if err := json.Unmarshal(b, &fields); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"min_psr_lu", "rms_dbfs", "crest_factor_db", "noise_floor_lufs", "head_silence_s", "tail_silence_s",
		"correlation", "balance_db", "dc_offset", "active_s", "speech_s", "speech_lufs"} {
		if v, ok := fields[name]; !ok || v != nil {
			t.Errorf("%s is %v (there: %v), want null", name, v, ok)
		}
	}
	line, err := f.Timeline(f.ctx, r.ID)
	if err != nil {
		t.Fatal(err)
	}
	if len(line.ShortTerm) != 3 || line.Active != nil || line.Speech != nil {
		t.Errorf("timeline: %+v", line)
	}
}
