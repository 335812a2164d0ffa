package audio

import (
	"fmt"
	"strings"
)

// MonoRule says how the loudness of a recording with one channel is counted. BS.1770 weighs the channel
// as the one it is; played on two loudspeakers, as most listeners hear it, the same sound is 3.01 LU
// louder and equals its twin with two channels of the same sound.
type MonoRule string

// The rules.
const (
	OneChannel      MonoRule = "one-channel"      // as BS.1770 has it
	TwoLoudspeakers MonoRule = "two-loudspeakers" // as it will be heard: 3.01 LU more
)

// MonoRules lists the rules.
var MonoRules = []MonoRule{OneChannel, TwoLoudspeakers}

// Words say how a single channel is counted.
func (r MonoRule) Words() string {
	if r == TwoLoudspeakers {
		return "as two loudspeakers play it (3.01 LU more)"
	}
	return "as one loudspeaker (BS.1770)"
}

// ParseMonoRule returns the rule of that name. The error lists the names there are.
func ParseMonoRule(name string) (MonoRule, error) {
	names := make([]string, len(MonoRules))
	for i, r := range MonoRules {
		if name == string(r) {
			return r, nil
		}
		names[i] = string(r)
	}
	return "", fmt.Errorf("%q is not a mono rule: it is %s", name, strings.Join(names, " or "))
}
