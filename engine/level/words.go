package level

import (
	"fmt"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
)

// words say what a plan does.
func (plan Plan) words(p profile.Profile) string {
	var parts []string
	add := func(format string, args ...any) { parts = append(parts, fmt.Sprintf(format, args...)) }
	if plan.mixed {
		add("mix it down to stereo (the figures are of the mix)")
	}
	if p.Anchor == profile.Speech && plan.Anchor != profile.Speech {
		add("nobody speaks, so all of it is brought to the target")
	}
	if r := plan.Ride; r != nil {
		add("ride it from %s to %s dB", signed(r.Least), signed(r.Most))
	}
	if plan.Compressor != nil {
		add("compress what rises %s dB over its loudness by %s to 1", audio.Number(float64(p.Compressor.Over), 0),
			strings.TrimSuffix(audio.Number(plan.Compressor.Ratio, 1), ".0"))
	}
	switch {
	case abs(plan.Gain) < leastGain:
		add("keep its level")
	case plan.Gain < 0:
		add("lower by %.1f dB", -plan.Gain)
	default:
		add("lift by %.1f dB", plan.Gain)
	}
	switch {
	case plan.Limit:
		add("hold peaks under %s dBTP", audio.Number(float64(p.Ceiling), 1))
	case p.Limiter.Most == 0 && plan.still() && plan.Aim-plan.Anchored > audio.LUFS(plan.Gain)+leastGain:
		parts[len(parts)-1] += ", as far as the peaks allow"
	}
	return strings.Join(parts, "; ")
}

// leftOver says what becomes of the room that peaks are left with under the ceiling, if it is worth a word.
func leftOver(room audio.DB, what string) string {
	if room < leastGain {
		return ""
	}
	return fmt.Sprintf(", but for %s dB that %s", audio.Number(float64(room), 1), what)
}

// signed writes a gain with its sign, to a tenth.
func signed(g audio.DB) string {
	s := audio.Number(float64(g), 1)
	if g > 0 && strings.Trim(s, "0.") != "" {
		return "+" + s
	}
	return s
}
