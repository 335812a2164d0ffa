package web

import (
	"testing"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// What is said to be written is what the delivered file was found to hold; where nobody looked, nothing is said.
func TestWritten(t *testing.T) {
	const dithered = ", dithered where that is shorter than what was worked with"
	for want, c := range map[string]struct {
		stored *level.Stored
		plan   profile.Delivered
	}{
		"": {nil, profile.Delivered{Dither: profile.Triangular}},
		"AC-3, 192 kbit/s, as a further sound track named “Levelled (transmitter)”":           {&level.Stored{Codec: "ac3", BitRate: 192_000, Film: true, Track: 2, Tracks: 2, Title: "Levelled (transmitter)"}, profile.Delivered{Dither: profile.Triangular}},
		"AAC, 127 kbit/s, in the place of the sound track it was made from":                   {&level.Stored{Codec: "aac", BitRate: 127_402, Film: true, Track: 1, Tracks: 1, Title: "Levelled (transmitter)"}, profile.Delivered{Film: profile.ReplaceTrack}},
		"FLAC with 24 bits" + dithered + ", in the place of the sound track it was made from": {&level.Stored{Codec: "flac", Bits: 24, Film: true, Track: 1, Tracks: 1}, profile.Delivered{Dither: profile.Triangular}},
		"MP3, 192 kbit/s":                {&level.Stored{Codec: "mp3", BitRate: 191_999}, profile.Delivered{Dither: profile.Triangular}},
		"Opus":                           {&level.Stored{Codec: "opus"}, profile.Delivered{Dither: profile.Triangular}},
		"PCM with 16 bits" + dithered:    {&level.Stored{Codec: "pcm_s16le", Bits: 16}, profile.Delivered{Dither: profile.Triangular}},
		"PCM, floating point of 32 bits": {&level.Stored{Codec: "pcm_f32le", Bits: 32}, profile.Delivered{Dither: profile.Triangular}},
		"ALAC with 16 bits, dithered with shaped noise where that is shorter than what was worked with": {&level.Stored{Codec: "alac", Bits: 16}, profile.Delivered{Dither: profile.Shaped}},
		"wavpack with 24 bits, without dither":                                                          {&level.Stored{Codec: "wavpack", Bits: 24}, profile.Delivered{Dither: profile.NoDither}},
	} {
		p := recordingPage{Levelled: &store.Job{Profile: "transmitter", Plan: &level.Plan{Delivered: c.plan}}, AfterReading: &store.Reading{Analysis: level.Analysis{Stored: c.stored}}}
		if got := p.writtenWords(); got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
}

func TestHeardSays(t *testing.T) {
	reading := func(s *level.Stored) *store.Reading { return &store.Reading{Analysis: level.Analysis{Stored: s}} }
	film := &level.Stored{Film: true, Track: 2, Tracks: 3, Title: "Main"}
	levelled := &level.Stored{Film: true, Track: 3, Tracks: 4, Title: "Levelled (film)"}
	for want, p := range map[string]recordingPage{
		"": {BeforeReading: reading(&level.Stored{Codec: "wav"}), AfterReading: reading(nil)},
		"Of the film you hear one sound track: before, track 2 of 3, “Main”.":                                         {BeforeReading: reading(film)},
		"Of the film you hear one sound track: before, track 2 of 3, “Main”; after, track 3 of 4, “Levelled (film)”.": {BeforeReading: reading(film), AfterReading: reading(levelled), Last: &store.Job{Output: "a.mkv"}},
	} {
		if got := p.HeardSays(); got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
}
