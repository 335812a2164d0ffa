package profile

import (
	"errors"
	"fmt"

	"evenshelf/engine/audio"
)

// ErrUnknown is returned by Named for a name that no built-in profile has.
var ErrUnknown = errors.New("no such profile")

// Timings of the limiter: short ones touch less of loud speech, long ones keep low notes clean.
var (
	forSpeech  = Limiter{Most: 10, LookAhead: 2, Hold: 5, Release: 30}
	forMusic   = Limiter{Most: 10, LookAhead: 5, Hold: 10, Release: 120}
	forConcert = Limiter{Most: 6, LookAhead: 5, Hold: 20, Release: 120}
)

// usual is what most profiles have in common.
var usual = Profile{
	Anchor: Programme, Target: -18, Tolerance: 0.3, Ceiling: -1, Mono: audio.OneChannel, Within: Leave, Group: Alone,
	Ride:       Ride{Speed: Still, Fastest: 2, Strength: Evening, Range: 20, Lift: 20, Cut: 20, Silence: 3, Fades: KeepFades},
	Compressor: Compressor{Over: 3, Ratio: 1, Knee: 6, Release: 150},
	Limiter:    forMusic,
	Delivered:  Delivered{Format: OwnFormat, Dither: Triangular, Film: AddTrack, Downmix: AllChannels},
	Harm: Harm{
		Over1: 0.5, Over3: 0.25, Over6: 0.05, Lift: 40, Floor: 6, Order: -1, RangeOver: 3, RangeLost: 6, SpeechShare: 0.1, SpeechLikelihood: 0.95,
	},
}

var builtin = []Profile{
	usual.with("concert",
		"Classical, jazz and live recordings: soft passages come up and loud ones down a little, slowly, and the order of loud and soft stays.",
		func(p *Profile) {
			p.Target = -20
			p.Ride = Ride{Speed: Slow, Fastest: 5, Strength: Evening, Range: 15, Deadband: 3, Lift: 12, Cut: 8, Silence: 3, Fades: KeepFades}
			p.Limiter = forConcert
			p.Harm.Order, p.Harm.RangeOver = 0.85, 0.5
		}),
	usual.with("film",
		"Films and documentaries heard at home: speech at one loudness, whispers brought up, effects brought down.",
		func(p *Profile) {
			p.Anchor, p.Target, p.Ceiling = Speech, -23, -2
			p.Ride = Ride{Speed: Medium, Fastest: 3, Strength: Evening, Range: 8, Deadband: 1, Lift: 18, Cut: 15, Step: 25, Silence: 3, Fades: KeepFades}
			p.Compressor = Compressor{Over: 8, Ratio: 3, Knee: 8, Release: 150}
		}),
	usual.with("rotation",
		"Music and jingles for a playout library: every recording at one loudness, peaks held under the ceiling.",
		func(p *Profile) {
			p.Ride = Ride{Speed: Slow, Fastest: 2, Strength: Evening, Range: 10, Deadband: 2, Lift: 15, Cut: 10, Step: 15, Silence: 3, Fades: KeepFades}
			p.Harm.Order, p.Harm.RangeOver = 0.75, 0.5
		}),
	usual.with("talk",
		"Podcasts, interviews, spoken word: every voice at one loudness, whoever sat too far from the microphone.",
		func(p *Profile) {
			p.Anchor, p.Target, p.Mono = Speech, -16, audio.TwoLoudspeakers
			p.Ride = Ride{Speed: Medium, Fastest: 3, Strength: Evening, Range: 6, Lift: 20, Cut: 20, Step: 15, Silence: 3, Fades: KeepFades}
			p.Compressor = Compressor{Over: 3, Ratio: 3, Knee: 6, Release: 80}
			p.Limiter = forSpeech
			p.Harm.SpeechShare = 0.4
		}),
	usual.with("transmitter",
		"The feed in front of a transmitter or a hand-held radio: even from moment to moment, nothing over the ceiling.",
		func(p *Profile) {
			p.Target, p.Ceiling = -16, -2
			p.Ride = Ride{Speed: Fast, Fastest: 2, Strength: Evening, Range: 5, Lift: 20, Cut: 20, Step: 15, Silence: 3, Fades: KeepFades}
			p.Compressor = Compressor{Over: 3, Ratio: 3, Knee: 6, Release: 150}
			p.Limiter = forSpeech
		}),
	usual.with("untouched",
		"One steady gain and no dynamics at all: for archives and albums. Stops short of the target where a peak would pass the ceiling.",
		func(p *Profile) { p.Limiter.Most = 0 }),
}

// with returns a profile that differs from p as change says.
func (p Profile) with(name, summary string, change func(*Profile)) Profile {
	p.Name, p.Summary = name, summary
	change(&p)
	return p
}

// Builtin returns the built-in profiles, ordered by name.
func Builtin() []Profile { return append([]Profile(nil), builtin...) }

// Named returns the built-in profile of that name, or an error wrapping ErrUnknown.
func Named(name string) (Profile, error) {
	for _, p := range builtin {
		if p.Name == name {
			return p, nil
		}
	}
	return Profile{}, fmt.Errorf("%w: %q", ErrUnknown, name)
}
