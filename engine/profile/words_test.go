package profile

import (
	"strings"
	"testing"
)

// told joins all sentences of a profile.
func told(p Profile) string {
	var b strings.Builder
	for _, s := range p.Words() {
		for _, w := range s.Words {
			b.WriteString(s.Title + ": " + w + "\n")
		}
	}
	return b.String()
}

func TestWordsSayWhatTheProfileDoes(t *testing.T) {
	talk, film := builtIn(t, "talk"), builtIn(t, "film")
	for _, c := range []struct {
		p    Profile
		says []string
		not  []string
	}{
		{talk, []string{"Speech is brought to −16 LUFS, within 0.3 LU; where nobody speaks, the whole programme is.",
			"The ride is of medium speed: it raises by 20 dB and lowers by 20 dB at the most.",
			"It steps in pauses between voices: for a difference of 6 dB if that holds for 0.4 s.", // 15 dB²·s / (6 dB)² = 0.42 s
			"It stands still in fades", "3:1", "No true peak passes −1 dBTP.", "Held for you when: less than 40 % of what is heard is speech"},
			[]string{"change places", "stays where it is", "30 %"}},
		{builtIn(t, "untouched"), []string{"The whole programme is brought", "There is no ride: one steady gain", "There is no compressor.", "Peaks are not touched"},
			[]string{"limiting", "limited", "pause", "speech"}},
		{builtIn(t, "concert"), []string{"What is within 3 dB of the programme stays where it is.", "makes no steps", "less than 0.85"}, []string{"Speech"}},
		{builtIn(t, "transmitter"), []string{"fast", "Mind: Levelling does not replace a station's own protection before the transmitter; the licence and local rules stand.",
			"Mind: Loud playback harms hearing: start quiet"}, nil},
		{parse(t, "based_on = 'film'\nwithin = 'level'\ndelivered = {bits = 24, dither = 'none'}\nride = {strength = 'gentle', fades = 'ride'}"),
			[]string{"narrowed to that, but at least 30 % of each difference stays", "levelled all the same", "in 24 bits, without dither.", "Fades at the start and the end are ridden"},
			[]string{"3:1"}},
		{parse(t, "based_on = 'untouched'\ngroup = 'folder'"), []string{"share one gain"}, nil},
		{parse(t, "based_on = 'untouched'\ngroup = 'album'"), []string{"recordings of an album, by their tags, share one gain"}, nil},
	} {
		got := told(c.p)
		for _, s := range c.says {
			if !strings.Contains(got, s) {
				t.Errorf("%s: nothing says %q in\n%s", c.p.Name, s, got)
			}
		}
		for _, s := range c.not {
			if strings.Contains(got, s) {
				t.Errorf("%s: says %q in\n%s", c.p.Name, s, got)
			}
		}
	}
	// Whatever changes the sound changes the words, or a person would choose blindly.
	for _, f := range Fields() {
		for _, p := range []Profile{film} {
			p.Ride.Strength, p.Harm.Order, p.Ride.Deadband = Evening, 0.5, 1
			other := p
			switch v := f.in(&other); {
			case f.Words != nil:
				v.SetString(f.Words[(indexOf(f.Words, v.String())+1)%len(f.Words)].Word)
			case f.Numbers != nil:
				v.SetInt(int64(f.Numbers[1]))
			case f.Name == "name" || f.Name == "summary":
				continue
			default:
				v.SetFloat(v.Float()*0.7 + 0.003)
			}
			if told(p) == told(other) {
				t.Errorf("%s goes from %s to %s without a word", f.Name, f.Value(p), f.Value(other))
			}
		}
	}
}
