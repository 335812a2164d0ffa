package level

import (
	"fmt"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/profile"
)

// Judge compares a delivered file, as read back from disk, with what the profile asks. What is doubtful
// is held for a person; the reason says what to listen for.
func Judge(p profile.Profile, before, after *Analysis, plan Plan) Verdict {
	var doubts []string
	doubt := func(format string, args ...any) { doubts = append(doubts, fmt.Sprintf(format, args...)) }

	for _, f := range before.Faults {
		if f.Severity != faults.Note {
			doubt("%s", f.Words)
		}
	}
	if plan.Gain > p.Harm.Lift {
		doubt("it had to be lifted by %.1f dB, so its noise is louder too", plan.Gain)
	}
	if drift := abs(after.Duration - before.Duration); drift > 0.05 {
		doubt("the copy is %.2f s shorter or longer than the original", drift)
	}
	if over := audio.DB(after.TruePeak - p.Ceiling); over > peakTolerance {
		doubt("its true peak is %.2f dB over the ceiling of %s dBTP", over, audio.Number(float64(p.Ceiling), 1))
	}
	short := p.Target.Sub(after.Integrated)
	// Without dynamics the peaks decide how far the gain goes; that is what such a profile asks for.
	asFarAsPeaksAllow := p.Limiter.Most == 0 && short > 0 && after.TruePeak > p.Ceiling-0.2
	if !(abs(short) <= p.Tolerance) && !asFarAsPeaksAllow {
		doubt("%s LUFS could not be reached within the limiting allowed: it came out at %s LUFS",
			audio.Number(float64(p.Target), 1), audio.Number(float64(after.Integrated), 1))
	}
	switch {
	case len(doubts) > 0:
		return Verdict{State: Held, Reason: strings.Join(doubts, "; ")}
	case asFarAsPeaksAllow && abs(short) > p.Tolerance:
		return Verdict{State: Done, Reason: fmt.Sprintf("%.1f LU short of the target: the peaks allow no more without dynamics", short)}
	case plan.Untouched:
		return Verdict{State: Done, Reason: plan.Reason}
	default:
		return Verdict{State: Done, Reason: ""}
	}
}
