package web

import (
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// deedsOf joins what a page tells of a job.
func deedsOf(j *store.Job, target float64) string {
	var parts []string
	for _, d := range (recordingPage{Levelled: j, Target: &target}).Deeds() {
		s := d.Label + ": " + d.Words
		if d.At != nil {
			s += " @" + audio.Clock(*d.At)
		}
		parts = append(parts, s)
	}
	return strings.Join(parts, "\n")
}

func TestDeeds(t *testing.T) {
	none := audio.Undefined
	f := newFake(30)
	ridden := f.jobList[doubted-1]
	ridden.Plan.Limit, ridden.Plan.Anchor, ridden.Plan.Gain = true, profile.Speech, 4.5
	ridden.Plan.Anchored, ridden.Plan.Ride.Range = -31.26, 6.2
	ridden.Treatment = &level.Treatment{Limited1: 0.031, Limited3: 0.0004, Deepest: 5.2, DeepestAt: 83.4, Order: 0.968}
	ridden.Foreseen = &store.Figures{Integrated: new(-18.0), TruePeak: new(-1.0)}
	ridden.After = &store.Figures{Integrated: new(-18.4), TruePeak: new(-0.7)}
	old := &store.Job{Plan: &level.Plan{Gain: -3.2, Ceiling: -1, Anchor: profile.Programme, Anchored: audio.LUFS(none), Aim: audio.LUFS(none)}}
	album := &store.Job{Plan: &level.Plan{Gain: 2, Limit: true, Ceiling: -2, Anchor: profile.Programme, Anchored: -20, Aim: -18.04,
		Delivered: profile.Delivered{Dither: profile.NoDither}}, Treatment: &level.Treatment{Order: audio.Ratio(none)}}
	for what, c := range map[string]struct {
		job  *store.Job
		want string
	}{
		"ridden": {&ridden, `Anchor: what people say, at −31.3 LUFS as it arrived, is brought to −18.0
Gain: rides between −1.7 and +10.5 dB where something is heard, slowly; +4.5 dB of it are steady; 42 % of the differences stay; a loudness range of 6.2 LU is foreseen
Pauses: lifted at the most 1.8 dB over the quieter of their neighbours @0:18.2
Compressor: from −10.5 LUFS on, 3:1, with a soft knee of 6 dB and a release of 80 ms
Peaks: held under −1.0 dBTP: more than 1 dB for 3.1 %, more than 3 dB for under 0.1 % of what is heard; 5.2 dB at the most @1:23.4
Order: what was louder stayed louder: 0.97, where 1 is all of it
Encoding: −18.0 LUFS and −1.0 dBTP became −18.4 and −0.7
Written: with 24 bits, dithered where that is shorter than what was worked with`},
		"by an engine that told less": {old, "Gain: −3.2 dB throughout\nPeaks: stay under −1.0 dBTP by themselves"},
		"one of a folder": {album, "Anchor: the whole programme, at −20.0 LUFS as it arrived, is brought to −18.0\nGain: +2.0 dB throughout\n" +
			"Peaks: held under −2.0 dBTP\nWritten: with the word length of the source, without dither"},
		"untouched":    {&store.Job{Plan: &level.Plan{Untouched: true}}, ""},
		"only planned": {&store.Job{}, ""},
		"not levelled": {nil, ""},
	} {
		if got := deedsOf(c.job, -18); got != c.want {
			t.Errorf("%s:\n%s\nwant\n%s", what, got, c.want)
		}
	}
	album.Plan.Aim = -14.2
	if got := deedsOf(album, -18); !strings.Contains(got, "is brought to −14.2: its gain is that of the whole folder") {
		t.Errorf("a shared gain is not explained: %s", got)
	}
}

// The figure that is asked for stands beside what the profile brings to it.
func TestTargetStandsBesideItsAnchor(t *testing.T) {
	for anchor, row := range map[profile.Anchor]string{profile.Programme: "Integrated loudness", profile.Speech: "Speech loudness"} {
		f := newFake(10)
		j := &f.jobList[1]
		j.Plan.Anchor, j.Plan.Aim = anchor, -18.5
		before, after, err := f.Readings(t.Context(), j.RecordingID)
		if err != nil {
			t.Fatal(err)
		}
		p := recordingPage{BeforeReading: before, AfterReading: after, Levelled: j, Target: new(-18.0)}
		for _, group := range p.Gauges() {
			asks := false
			for _, g := range group.Rows {
				asks = asks || g.Asked.Defined
				if g.Asked.Defined != (g.Label == row) || g.Asked.Defined && g.Asked.Text != "−18.5" {
					t.Errorf("%s: %s is asked for %+v", anchor, g.Label, g.Asked)
				}
			}
			if asks != group.Asks {
				t.Errorf("%s: the table %s has a column for it: %v", anchor, group.Title, group.Asks)
			}
		}
	}
}

func TestGainSpan(t *testing.T) {
	for want, p := range map[string]level.Plan{
		"+4.2":          {Gain: 4.2},
		"−6.2 … +9.8":   {Gain: 1.8, Ride: &level.Ride{Least: -8, Most: 8}},
		"+3.0":          {Gain: 3, Ride: &level.Ride{Least: audio.DB(audio.Undefined), Most: audio.DB(audio.Undefined)}},
		"−12.0 … −10.0": {Gain: -11, Ride: &level.Ride{Least: -1, Most: 1}},
	} {
		if got := gainSpan(&p); got != want {
			t.Errorf("%s, want %s", got, want)
		}
	}
}
