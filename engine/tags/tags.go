// Package tags knows what a media file carries beside its sound, and which of it goes stale when the sound's level
// changes. Its rooms each know one carrier: id3 (MP3), vorbis (comments in FLAC and Ogg), mp4.
//
// Everything is carried byte for byte; only what is known to be wrong after a change of level is left out or written
// anew. A carrier that is damaged is never a reason to lose the sound: what cannot be understood is left as it is, or
// out.
package tags

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"evenshelf/engine/audio"
)

// Loudness is what gain tags are made of.
type Loudness struct {
	Integrated audio.LUFS
	Peak       audio.DBTP // true peak
}

// Gains are a recording's open gain tags: for itself, and for the album it belongs to.
type Gains struct {
	Track Loudness
	Album *Loudness // nil: none is written
}

// References of the open gain tags (ReplayGain 2.0; RFC 7845, 5.2.1).
const (
	replayGainReference audio.LUFS = -18
	r128Reference       audio.LUFS = -23
)

// ReplayGain returns the four ReplayGain 2.0 tags, or the two of a track without album, as name and text:
// "REPLAYGAIN_TRACK_GAIN", "-7.89 dB". Gains have two decimals, peaks are linear with six.
func (g Gains) ReplayGain() [][2]string {
	pairs := replayGain("TRACK", g.Track)
	if g.Album != nil {
		pairs = append(pairs, replayGain("ALBUM", *g.Album)...)
	}
	return pairs
}

func replayGain(of string, l Loudness) [][2]string {
	gain := math.Round(100*float64(replayGainReference-l.Integrated)) / 100
	return [][2]string{
		{"REPLAYGAIN_" + of + "_GAIN", fmt.Sprintf("%.2f dB", gain+0)}, // + 0: never "-0.00"
		{"REPLAYGAIN_" + of + "_PEAK", fmt.Sprintf("%.6f", math.Pow(10, float64(l.Peak)/20))},
	}
}

// R128 returns the gain tags of an Opus file: whole numbers of 1/256 dB to −23 LUFS. The loudness is that of the sound
// with the header's output gain applied, as decoders deliver it.
func (g Gains) R128() [][2]string {
	pairs := [][2]string{{"R128_TRACK_GAIN", q78(g.Track)}}
	if g.Album != nil {
		pairs = append(pairs, [2]string{"R128_ALBUM_GAIN", q78(*g.Album)})
	}
	return pairs
}

func q78(l Loudness) string {
	q := math.Round(256 * float64(r128Reference-l.Integrated))
	return fmt.Sprint(int(min(max(q, math.MinInt16), math.MaxInt16)))
}

// Stale reports whether a tag of this name states a level or a length that a levelled copy no longer has: a gain of any
// kind ("FILE_GAIN_UNDO", but not "AGAIN"), or what players note of either.
func Stale(name string) bool {
	return IsGain(name) || PlayersNote(name) || slices.Contains(words(name), "GAIN")
}

// IsGain reports whether a tag of this name is one of the open gain tags, which writing new ones replaces.
func IsGain(name string) bool {
	w := words(name)
	return slices.Contains(w, "REPLAYGAIN") || strings.HasPrefix(strings.ToUpper(name), "R128_")
}

// PlayersNote reports whether a tag of this name is a player's note of a level ("…NORM") or of a length ("…SMPB").
func PlayersNote(name string) bool {
	name = strings.ToUpper(name)
	return strings.HasSuffix(name, "NORM") || strings.HasSuffix(name, "SMPB")
}

// words are the runs of letters in a name, in capitals.
func words(name string) []string {
	return strings.FieldsFunc(strings.ToUpper(name), func(r rune) bool { return r < 'A' || r > 'Z' })
}
