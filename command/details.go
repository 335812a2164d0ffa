package command

import (
	"fmt"
	"strings"
	"unicode/utf8"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
)

// detail is one line of details: what it is, and the figure with its unit, cut before its decimal point.
type detail struct{ name, whole, rest string }

// detailed tells a figure, or a dash where there is none.
func detailed[F ~float64](name string, v F, decimals int, unit string) detail {
	whole, rest := "–", ""
	if audio.Defined(v) {
		whole, rest = cut(audio.Number(float64(v), decimals))
	}
	return detail{name, whole, fmt.Sprintf("%-3s %s", rest, unit)}
}

// cut parts a figure before its decimal point.
func cut(figure string) (whole, rest string) {
	whole, rest, _ = strings.Cut(figure, ".")
	return whole, "." + rest
}

// String puts the decimal points of all lines below one another.
func (d detail) String() string {
	if d.whole == "" {
		return d.name
	}
	return fmt.Sprintf("%-*s%s%s", 43-utf8.RuneCountInString(d.whole), d.name, d.whole, d.rest)
}

// details is everything a reading says, for an engineer at a terminal: figures of one kind together, a dash for
// what is not defined.
func details(a *level.Analysis) string {
	var b strings.Builder
	counted := ""
	if a.Channels == 1 {
		counted = "  its channel is counted " + a.MonoRule.Words() + "\n"
	}
	fmt.Fprintf(&b, "  %s, %d Hz, %s, %s, read by %s, engine %s\n%s", printable(a.FormatName), a.SampleRate, a.Layout,
		audio.Clock(a.Duration), printable(a.Decoder), a.Engine, counted)
	group := func(title string, lines ...detail) {
		fmt.Fprintf(&b, "\n  %s\n", title)
		for _, l := range lines {
			fmt.Fprintln(&b, strings.TrimRight("    "+l.String(), " "))
		}
	}
	group("Loudness",
		detailed("integrated", a.Integrated, 1, "LUFS"),
		detailed("loudest 3 seconds (short-term)", a.MaxShortTerm, 1, "LUFS"),
		detailed("loudest 400 ms (momentary)", a.MaxMomentary, 1, "LUFS"),
		detailed("loud passages (95 % are quieter)", a.ShortTerm95, 1, "LUFS"),
		detailed("usual passages (half are quieter)", a.ShortTerm50, 1, "LUFS"),
		detailed("quiet passages (10 % are quieter)", a.ShortTerm10, 1, "LUFS"),
		detailed("noise floor (quietest twentieth)", a.NoiseFloor, 1, "LUFS"))
	group("Peaks",
		detailed("true peak", a.TruePeak, 1, "dBTP"),
		detailed("sample peak", a.SamplePeak, 1, "dBFS"))
	group("Dynamics",
		detailed("loudness range (LRA)", a.Range, 1, "LU"),
		detailed("true peak over integrated (PLR)", a.PLR, 1, "LU"),
		detailed("least peak over short-term (min. PSR)", a.MinPSR, 1, "LU"),
		detailed("crest factor (a sine reads 3.0)", a.CrestFactor, 1, "dB"))
	group("Signal",
		detailed("rms (a full-scale sine reads 0)", a.RMS, 1, "dBFS"),
		detailed("correlation of left and right", a.Correlation, 2, "(1 alike, −1 opposite polarity)"),
		detailed("balance, right over left", a.Balance, 1, "dB"),
		detailed("constant offset (DC)", 100*a.Offset, 2, "% of full scale"),
		detailed("silence at the head", a.HeadSilence, 1, "s"),
		detailed("silence at the tail", a.TailSilence, 1, "s"))
	group("Speech", speechDetails(a)...)
	group("Faults", faultDetails(a)...)
	return b.String()
}

// speechDetails tell how much is heard, how much of that is speech and how loud it is.
func speechDetails(a *level.Analysis) []detail {
	if !audio.Defined(a.ActiveTime) {
		return []detail{{name: "not looked for"}}
	}
	lasting := func(name string, s audio.Seconds, more string) detail {
		whole, rest := cut(audio.Clock(float64(s)))
		return detail{name, whole, rest + more}
	}
	lines := []detail{lasting("programme is heard for", a.ActiveTime, "")}
	if a.SpeechTime == 0 {
		return append(lines, detail{name: "no speech found"})
	}
	return append(lines, lasting("of which speech", a.SpeechTime, "  ("+a.Share()+" %)"),
		detailed("speech loudness", a.SpeechLoudness, 1, "LUFS"))
}

// faultDetails tell what is wrong, worst first.
func faultDetails(a *level.Analysis) (lines []detail) {
	for _, f := range a.Faults {
		at := audio.Clock(f.At)
		if f.Throughout(a.Duration) {
			at = "throughout"
		}
		lines = append(lines, detail{name: fmt.Sprintf("%10s  %-8s %s", at, f.Severity, f.Words)})
	}
	switch looked := audio.Defined(a.ActiveTime); {
	case !looked:
		lines = append(lines, detail{name: "not looked for beyond damage met while decoding"})
	case lines == nil:
		lines = []detail{{name: "none found"}}
	}
	return lines
}
