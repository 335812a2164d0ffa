package audio

import (
	"strings"
	"testing"
)

func TestParseMonoRule(t *testing.T) {
	for _, want := range MonoRules {
		if got, err := ParseMonoRule(string(want)); got != want || err != nil {
			t.Errorf("%q is read as %q, %v", want, got, err)
		}
	}
	for _, name := range []string{"", "stereo", "One-Channel"} {
		_, err := ParseMonoRule(name)
		if err == nil || !strings.Contains(err.Error(), string(OneChannel)+" or "+string(TwoLoudspeakers)) {
			t.Errorf("%q gives %v", name, err)
		}
	}
}
