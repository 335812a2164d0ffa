package web

import (
	"reflect"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/store"
)

// A figure that is measured and not shown would be of no use to anybody who looks at the page.
func TestGaugesShowEveryFigure(t *testing.T) {
	var a level.Analysis
	figures := map[string]reflect.Value{}
	for _, part := range []any{&a.Reading, &a.Condition, &a.Dialogue} {
		v := reflect.ValueOf(part).Elem()
		for i := range v.NumField() {
			if name := v.Type().Field(i).Name; v.Field(i).CanFloat() && name != "Duration" { // which is at the top of the page
				figures[name] = v.Field(i)
				v.Field(i).SetFloat(10)
			}
		}
	}
	if len(figures) < 22 {
		t.Fatalf("only %d figures found", len(figures))
	}
	shown := gaugesOf(&a)
	for name, v := range figures {
		for _, other := range []float64{7, audio.Undefined} {
			v.SetFloat(other)
			if reflect.DeepEqual(gaugesOf(&a), shown) {
				t.Errorf("%s is not shown: %g reads as 10", name, other)
			}
		}
		v.SetFloat(10)
	}
	for _, group := range shown {
		for _, row := range group.Rows {
			if !strings.HasSuffix(row.Meaning, ".") {
				t.Errorf("%s is not explained", row.Label)
			}
		}
	}
}

// Readings of an engine that did not know a figure show a dash for it.
func TestOldReadingHasDashes(t *testing.T) {
	f := newFake(10)
	e := newSite(t, f)
	dash := `title="not defined">–<`
	_, old := fetch(t, e, "/recordings/5")
	if n := strings.Count(old, dash); n != 2*12 {
		t.Errorf("%d dashes for 12 figures in two readings", n)
	}
	if strings.Contains(words(old), "peech was found") || strings.Contains(words(old), "Speech in") {
		t.Error("the page tells of speech that was not looked for")
	}
	const why = "It was read by engine 1, which knew fewer figures and faults"
	if _, now := fetch(t, e, "/recordings/1"); !strings.Contains(words(old), why) || strings.Contains(words(now), why) {
		t.Error("the old reading does not say why there are dashes, or the new one does")
	}
	if _, now := fetch(t, e, "/recordings/1"); strings.Count(now, dash) != 2 { // speech loudness, without speech
		t.Errorf("%d dashes in readings that are complete", strings.Count(now, dash))
	}
}

func TestMonoSays(t *testing.T) {
	reading := func(channels int, rule audio.MonoRule) *store.Reading {
		r := &store.Reading{}
		r.Channels, r.MonoRule = channels, rule
		return r
	}
	one, two := audio.OneChannel, audio.TwoLoudspeakers
	for _, c := range []struct {
		before, after *store.Reading
		want          string
	}{
		{nil, nil, ""},
		{reading(2, one), reading(2, two), ""},
		{reading(1, one), nil, "Its single channel is counted as one loudspeaker (BS.1770)."},
		{reading(1, two), reading(1, two), "Its single channel is counted as two loudspeakers play it (3.01 LU more)."},
		{reading(1, two), reading(1, one), "Its single channel was counted as two loudspeakers play it (3.01 LU more) before, and as one loudspeaker (BS.1770) after: these loudnesses do not compare."},
	} {
		if got := (recordingPage{BeforeReading: c.before, AfterReading: c.after}).MonoSays(); got != c.want {
			t.Errorf("said %q, want %q", got, c.want)
		}
	}
}

func TestSpeechSays(t *testing.T) {
	a := level.Unmeasured()
	p := recordingPage{BeforeReading: &store.Reading{Analysis: a}}
	if got := p.SpeechSays(); got != "" {
		t.Errorf("not looked for: %q", got)
	}
	p.BeforeReading.ActiveTime, p.BeforeReading.SpeechTime = 100, 0
	if got := p.SpeechSays(); got != "No speech was found." {
		t.Errorf("none found: %q", got)
	}
	p.BeforeReading.SpeechTime = 0.4 // too little to have a loudness
	if got := p.SpeechSays(); got != "Speech in under 1 % of what is heard." {
		t.Errorf("a word between songs: %q", got)
	}
	p.BeforeReading.SpeechTime, p.BeforeReading.SpeechLoudness = 84.4, -20
	if got := p.SpeechSays(); got != "Speech in 84 % of what is heard." {
		t.Errorf("found: %q", got)
	}
}
