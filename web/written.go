package web

import (
	"fmt"
	"strings"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// codecs gives the names of codecs as people write them; others go by FFmpeg's.
var codecs = map[string]string{"aac": "AAC", "ac3": "AC-3", "eac3": "E-AC-3", "mp3": "MP3", "opus": "Opus", "vorbis": "Vorbis", "flac": "FLAC", "alac": "ALAC"}

// writtenWords tells what the levelled sound was written in; "" where the reading of it is of an earlier version, which
// did not say.
func (p recordingPage) writtenWords() string {
	s := storedAs(p.AfterReading)
	if s == nil {
		return ""
	}
	d := p.Levelled.Plan.Delivered
	words := codecWords(s)
	if s.Bits > 0 && !strings.HasPrefix(s.Codec, "pcm_f") {
		words += ditherWords(d.Dither)
	}
	switch further := d.Film != profile.ReplaceTrack && s.Title == media.LevelledTitle(p.Levelled.Profile); {
	case s.Film && further:
		words += fmt.Sprintf(", as a further sound track named “%s”", s.Title)
	case s.Film:
		words += ", in the place of the sound track it was made from"
	}
	return words
}

// codecWords are a codec and its bit rate or word length.
func codecWords(s *level.Stored) string {
	name := codecs[s.Codec]
	switch {
	case strings.HasPrefix(s.Codec, "pcm_f"):
		return fmt.Sprintf("PCM, floating point of %d bits", s.Bits)
	case strings.HasPrefix(s.Codec, "pcm_"):
		name = "PCM"
	case name == "":
		name = s.Codec
	}
	switch {
	case s.Bits > 0:
		return fmt.Sprintf("%s with %d bits", name, s.Bits)
	case s.BitRate > 0:
		return fmt.Sprintf("%s, %d kbit/s", name, (s.BitRate+500)/1000)
	}
	return name
}

func ditherWords(d profile.Dither) string {
	switch d {
	case profile.Triangular:
		return ", dithered where that is shorter than what was worked with"
	case profile.Shaped:
		return ", dithered with shaped noise where that is shorter than what was worked with"
	case profile.NoDither:
		return ", without dither"
	}
	return ""
}

// HeardSays tells which sound tracks of a film the player plays; "" where there is no choice.
func (p recordingPage) HeardSays() string {
	before, after := storedAs(p.BeforeReading), storedAs(p.AfterReading)
	if before == nil || !before.Film {
		return ""
	}
	says := "Of the film you hear one sound track: before, " + trackWords(before)
	if after != nil && after.Film && p.Last != nil && p.Last.Output != "" {
		says += "; after, " + trackWords(after)
	}
	return says + "."
}

func trackWords(s *level.Stored) string {
	words := fmt.Sprintf("track %d of %d", s.Track, s.Tracks)
	if s.Title != "" {
		words += fmt.Sprintf(", “%s”", s.Title)
	}
	return words
}

func storedAs(r *store.Reading) *level.Stored {
	if r == nil {
		return nil
	}
	return r.Stored
}
