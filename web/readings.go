package web

import (
	"cmp"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// gauge is one figure of a recording as it arrived and as it is delivered, and what it means in plain words.
type gauge struct {
	Label, Meaning string
	Before, After  figure
	Asked          figure // by the profile
	AtMost         bool   // what is asked for is a limit, not an aim
}

// gauges are figures of one kind.
type gauges struct {
	Title string
	Asks  bool // the profile asks for one of them
	Rows  []gauge
}

// Gauges puts both readings side by side, figures of one kind together. Without a reading there are none.
func (p recordingPage) Gauges() []gauges {
	if p.BeforeReading == nil {
		return nil
	}
	groups := gaugesOf(&p.BeforeReading.Analysis)
	if p.AfterReading != nil {
		for g, after := range gaugesOf(&p.AfterReading.Analysis) {
			for i, row := range after.Rows {
				groups[g].Rows[i].After = row.Before
			}
		}
	}
	loudness, peaks := &groups[0], &groups[1]
	peaks.Asks = p.Ceiling != nil
	anchor, at, target := loudness, 0, newFigure(p.Target, "LUFS")
	if j := p.Levelled; j != nil && j.Plan != nil {
		if j.Plan.Anchor == profile.Speech {
			anchor, at = &groups[3], 2
		}
		if audio.Defined(j.Plan.Aim) {
			target = newFigure(j.Plan.Aim, "LUFS")
		}
	}
	anchor.Asks, anchor.Rows[at].Asked = p.Target != nil, target
	peaks.Rows[0].Asked, peaks.Rows[0].AtMost = newFigure(p.Ceiling, "dBTP"), true
	return groups
}

// gaugesOf lists the figures of one reading as Before.
func gaugesOf(a *level.Analysis) []gauges {
	row := func(label string, f figure, meaning string) gauge {
		return gauge{Label: label, Meaning: meaning, Before: f}
	}
	return []gauges{
		{Title: "Loudness", Rows: []gauge{
			row("Integrated loudness", newFigure(a.Integrated, "LUFS"), "Loudness of the whole recording; passages far below the rest do not count (BS.1770)."),
			row("Loudest 3 seconds", newFigure(a.MaxShortTerm, "LUFS"), "The highest short-term loudness."),
			row("Loudest moment", newFigure(a.MaxMomentary, "LUFS"), "The highest momentary loudness, over 400 ms."),
			row("Loud passages", newFigure(a.ShortTerm95, "LUFS"), "95 % of the short-term loudness lies below: the head of its spine."),
			row("Usual passages", newFigure(a.ShortTerm50, "LUFS"), "Half of the short-term loudness lies below: its median."),
			row("Quiet passages", newFigure(a.ShortTerm10, "LUFS"), "10 % of the short-term loudness lies below: the foot of its spine."),
			row("Noise floor", newFigure(a.NoiseFloor, "LUFS"), "5 % of the momentary loudness lies below, digital silence left out: the noise, if there are pauses in which to hear it."),
		}},
		{Title: "Peaks and dynamics", Rows: []gauge{
			row("True peak", newFigure(a.TruePeak, "dBTP"), "The highest point of the wave, between the samples too."),
			row("Sample peak", newFigure(a.SamplePeak, "dBFS"), "The largest sample."),
			row("Loudness range (LRA)", newFigure(a.Range, "LU"), "How far quiet and loud passages lie apart, the extremes left out (EBU Tech 3342)."),
			row("Peak over loudness (PLR)", newFigure(a.PLR, "LU"), "True peak minus integrated loudness."),
			row("Least peak over 3 s (PSR)", newFigure(a.MinPSR, "LU"), "True peak minus short-term loudness, in the 3 seconds where they are closest."),
			row("Crest factor", newFigure(a.CrestFactor, "dB"), "How far the largest sample lies above the root mean square: 3.0 for a sine."),
		}},
		{Title: "Signal", Rows: []gauge{
			row("RMS level", newFigure(a.RMS, "dBFS"), "Mean power of all channels together, on a scale where a full-scale sine reads 0."),
			row("Correlation", decimals(float64(a.Correlation), 2, ""), "How alike left and right are: 1 the same, 0 unrelated, −1 opposite polarity, which cancels in mono."),
			row("Balance", newFigure(a.Balance, "dB"), "Right over left: positive where the right is stronger."),
			row("DC offset", decimals(100*float64(a.Offset), 2, "%"), "How far the middle of the wave lies from zero, of full scale, in the channel where that is furthest."),
			row("Silence at the head", newFigure(a.HeadSilence, "s"), "Before the first sample above −70 dBFS."),
			row("Silence at the tail", newFigure(a.TailSilence, "s"), "After the last sample above −70 dBFS."),
			row("Sample rate", figure{true, audio.Count(a.SampleRate), "Hz"}, "Samples a second in each channel."),
			row("Channels", figure{Defined: true, Text: cmp.Or(a.Layout, audio.Count(a.Channels))}, "How many the file has, and how they are placed."),
		}},
		{Title: "Speech", Rows: []gauge{
			row("Programme heard", lasting(a.ActiveTime), "How long something is heard; the rest is pauses."),
			row("Of which speech", figure{a.Share() != "", a.Share(), "%"}, "The part of what is heard that is speech."),
			row("Speech loudness", newFigure(a.SpeechLoudness, "LUFS"), "Loudness of the speech alone; it takes a second of it to tell."),
		}},
	}
}

func lasting(s audio.Seconds) figure {
	if !audio.Defined(s) {
		return figure{}
	}
	return figure{Defined: true, Text: length(float64(s), true)}
}

// SpeechSays tells how much speech there is, for those who do not see the chart; "" if it was not looked for.
func (p recordingPage) SpeechSays() string {
	r := p.BeforeReading
	switch {
	case r == nil || !audio.Defined(r.ActiveTime):
		return ""
	case r.SpeechTime == 0:
		return "No speech was found."
	}
	return fmt.Sprintf("Speech in %s %% of what is heard.", r.Share())
}

// OldSays tells why figures are missing from readings of an engine that knew fewer; "" if none are.
func (p recordingPage) OldSays() string {
	for _, r := range []*store.Reading{p.BeforeReading, p.AfterReading} {
		if r != nil && r.Engine != level.Version && !audio.Defined(r.ActiveTime) {
			return fmt.Sprintf("It was read by engine %s, which knew fewer figures and faults: the next run fills in the dashes.", r.Engine)
		}
	}
	return ""
}

// MonoSays tells how the single channel of a recording was counted; "" for one with more.
func (p recordingPage) MonoSays() string {
	mono := func(r *store.Reading) bool { return r != nil && r.Channels == 1 }
	b, a := p.BeforeReading, p.AfterReading
	switch {
	case mono(b) && mono(a) && b.MonoRule != a.MonoRule:
		return fmt.Sprintf("Its single channel was counted %s before, and %s after: these loudnesses do not compare.", b.MonoRule.Words(), a.MonoRule.Words())
	case mono(b):
		return fmt.Sprintf("Its single channel is counted %s.", b.MonoRule.Words())
	}
	return ""
}
