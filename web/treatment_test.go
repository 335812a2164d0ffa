package web

import (
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// as24 is of a delivery in FLAC.
var as24 = &store.Reading{Analysis: level.Analysis{Stored: &level.Stored{Codec: "flac", Bits: 24}}}

// deedsOf joins what a page tells of a job.
func deedsOf(j *store.Job, target float64) string {
	var parts []string
	for _, d := range (recordingPage{Levelled: j, Target: &target, AfterReading: as24}).Deeds() {
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
	ridden.SpeechBefore, ridden.SpeechAfter = new(-31.26), new(-18.14)
	ridden.Before = &store.Figures{Integrated: new(-33.0), Range: new(20.06)}
	ridden.Treatment = &level.Treatment{Limited1: 0.031, Limited3: 0.0004, Compressed: 2.34, Deepest: 5.2, DeepestAt: 83.4, Order: 0.968}
	ridden.Foreseen = &store.Figures{Integrated: new(-18.0), TruePeak: new(-1.0)}
	ridden.After = &store.Figures{Integrated: new(-18.4), Range: new(6.2), TruePeak: new(-0.7)}
	old := &store.Job{Plan: &level.Plan{Gain: -3.2, Ceiling: -1, Anchor: profile.Programme, Anchored: audio.LUFS(none), Aim: audio.LUFS(none)}}
	album := &store.Job{Plan: &level.Plan{Gain: 2, Limit: true, Ceiling: -2, Anchor: profile.Programme, Anchored: -20, Aim: -18.04,
		Delivered: profile.Delivered{Dither: profile.NoDither}}, Treatment: &level.Treatment{Order: audio.Ratio(none)}, Before: &store.Figures{Integrated: new(-20.0)}, After: &store.Figures{Integrated: new(-18.1)}}
	for what, c := range map[string]struct {
		job  *store.Job
		want string
	}{
		"ridden": {&ridden, `Loudness: what people say came from −31.3 to −18.1 LUFS: +13.1 LU; −18.0 was aimed at
Range: a loudness range of 20.1 LU became 6.2 LU
Gain: rides between −1.7 and +10.5 dB where something is heard, slowly; +4.5 dB of it are steady
Pauses: lifted at the most 1.8 dB over the lower of the gains beside them @0:18.2
Compressor: took 2.3 dB off on average: from −10.5 LUFS on, 3:1, with a soft knee of 6 dB and a release of 80 ms
Peaks: held under −1.0 dBTP: more than 1 dB for 3.1 %, more than 3 dB for under 0.1 % of what is heard; 5.2 dB at the most @1:23.4
Foreseen: −18.0 LUFS and −1.0 dBTP before it was encoded; −18.4 and −0.7 came out
Written: FLAC with 24 bits, dithered where that is shorter than what was worked with`},
		"by an engine that told less": {old, "Gain: −3.2 dB throughout\nPeaks: stay under −1.0 dBTP by themselves\nWritten: FLAC with 24 bits"},
		"one of a folder": {album, "Loudness: the whole programme came from −20.0 to −18.1 LUFS: +1.9 LU; −18.0 was aimed at\nGain: +2.0 dB throughout\n" +
			"Peaks: held under −2.0 dBTP\nWritten: FLAC with 24 bits, without dither"},
		"untouched":    {&store.Job{Plan: &level.Plan{Untouched: true}}, ""},
		"only planned": {&store.Job{}, ""},
		"not levelled": {nil, ""},
	} {
		if got := deedsOf(c.job, -18); got != c.want {
			t.Errorf("%s:\n%s\nwant\n%s", what, got, c.want)
		}
	}
	album.Plan.Aim = -14.2
	if got := deedsOf(album, -18); !strings.Contains(got, "−14.2 was aimed at: its gain is that of the whole folder") {
		t.Errorf("a shared gain is not explained: %s", got)
	}
	album.Plan.Compressor, album.Plan.Limit, album.Treatment.Order = &dynamics.Compression{Ratio: 2}, false, 0.14
	album.Treatment.Compressed = 0.01
	for _, want := range []string{"Order: the order of loud and soft: 0.14 (1: as it was, 0: none left)", "Compressor: took less than 0.1 dB off on average: from",
		"Peaks: under −2.0 dBTP after the compressor, with no limiting"} {
		if got := deedsOf(album, -18); !strings.Contains(got, want) {
			t.Errorf("it is not said that %q: %s", want, got)
		}
	}
	album.Treatment.Compressed = audio.DB(none)
	if got := deedsOf(album, -18); !strings.Contains(got, "Compressor: from") {
		t.Errorf("a compressor of which it was not noted: %s", got)
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

// What came out is told, not what was planned; the gain of the plan is told where it is another.
func TestOutcome(t *testing.T) {
	none := audio.DB(audio.Undefined)
	at := func(lufs float64) *store.Figures { return &store.Figures{Integrated: &lufs} }
	for want, j := range map[outcome]store.Job{
		{"+4.2", ""}:              {Plan: &level.Plan{Gain: 4.2}, Before: at(-22.2), After: at(-18)},
		{"+2.9", "+4.2"}:          {Plan: &level.Plan{Gain: 4.2}, Before: at(-22.2), After: at(-19.3)}, // a compressor or an encoder
		{"+2.2", "−6.2 … +9.8"}:   {Plan: &level.Plan{Gain: 1.8, Ride: &level.Ride{Least: -8, Most: 8}}, Before: at(-20.2), After: at(-18)},
		{"", "+3.0"}:              {Plan: &level.Plan{Gain: 3, Ride: &level.Ride{Least: none, Most: none}}, Before: at(-20)},
		{"speech +9.0", "+12.0"}:  {Plan: &level.Plan{Gain: 12, Anchor: profile.Speech}, Before: at(-27), After: at(-17), SpeechBefore: new(-25.0), SpeechAfter: new(-16.0)},
		{"+10.0", "+12.0"}:        {Plan: &level.Plan{Gain: 12, Anchor: profile.Speech}, Before: at(-27), After: at(-17), SpeechAfter: new(-16.0)},
		{"−7.0", "−12.0 … −10.0"}: {Plan: &level.Plan{Gain: -11, Ride: &level.Ride{Least: -1, Most: 1}}, Before: at(-11), After: at(-18)},
	} {
		if got := newOutcome(j); got != want {
			t.Errorf("%+v, want %+v", got, want)
		}
	}
}

// What a list has no room for is a press away, as is the moment to listen to.
func TestListOfHeldLinksToAllDoubts(t *testing.T) {
	_, body := fetch(t, newSite(t, newFake(96)), "/recordings?state=held")
	for _, want := range []string{`href="/recordings/18#at=83.2"`, `href="/recordings/18">and 2 more</a>`} {
		if !strings.Contains(body, want) {
			t.Errorf("no link %s", want)
		}
	}
}
