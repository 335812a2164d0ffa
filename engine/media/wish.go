package media

import (
	"cmp"
	"fmt"
	"slices"

	"evenshelf/engine/audio"
)

// Wish is what a delivery asks for where the source's own format would not do. The zero value asks for nothing.
type Wish struct {
	Format  string // "wav", "flac", "mp3", "m4a", "ogg", "opus"; "" the source's own
	BitRate int    // bit/s of a lossy format; 0: the source's, or the format's best
	Bits    int    // word length where whole numbers or floats are stored: 16, 24, 32; 0: the source's own
	Plain   bool   // rounding without dither
	Shaped  bool   // dither with shaped noise
	// InPlace puts the levelled sound of a film where the track was that it was made from; else it is a further one.
	InPlace bool
	Stereo  bool   // more than two channels are mixed down to two
	Title   string // of a further track of a film
}

// MetBy reports whether a recording is as wished already, so that it need not be written for that.
func (w Wish) MetBy(i Info) bool {
	own := w.Format == "" || w.Format == formatOf(i) || i.Video // a film stays one
	word := w.Bits == 0 || i.BitDepth == 0 || !i.Float && i.BitDepth == wordOf(i.Container, w.Bits)
	return own && word && !i.Mixed && !(w.Stereo && i.Format.Layout.Channels > 2)
}

// formatOf is the name that a Wish has for the format of a recording, or "".
func formatOf(i Info) string {
	switch {
	case i.Video:
		return ""
	case i.Container == "wav", i.Container == "flac", i.Container == "mp3" && i.Codec == "mp3":
		return i.Container
	case i.Container == "mp4" && i.Codec == "aac":
		return "m4a"
	case i.Container == "ogg" && i.Codec == "vorbis":
		return "ogg"
	case i.Container == "ogg" && i.Codec == "opus":
		return "opus"
	}
	return ""
}

// wordOf is the word length a container's whole numbers have if so many bits are asked for: FLAC and ALAC have
// room for 24.
func wordOf(container string, bits int) int {
	if container == "wav" || container == "aiff" {
		return bits
	}
	return min(bits, 24)
}

// withWord returns the spec with another word length where it stores whole numbers or floating point; 0 keeps the
// spec's own. Formats that have no room for a length get their longest, lossy ones have none.
func (s Spec) withWord(bits int) Spec {
	if bits == 0 || s.BitDepth == 0 {
		return s
	}
	s.BitDepth, s.Float = wordOf(s.Container, bits), false
	switch s.Container {
	case "wav":
		s.Codec = fmt.Sprintf("pcm_s%dle", bits)
	case "aiff":
		s.Codec = fmt.Sprintf("pcm_s%dbe", bits)
	}
	return s
}

// inFormat is the spec of a recording in a format that is not its own.
func (t *Toolbox) inFormat(format string, info Info) (Spec, string) {
	depth := wholeDepth(info.BitDepth)
	if info.BitDepth == 0 || info.Float {
		depth = 24 // lossy and floating-point sound is finer than 16 bits
	}
	switch format {
	case "wav":
		return wavSpec(depth, info.Float), ""
	case "flac":
		return flacOrWAV(Info{Format: info.Format, BitDepth: depth}, "")
	}
	codec := map[string]string{"m4a": "aac", "ogg": "vorbis"}[format]
	if codec == "" {
		codec = format
	}
	l := lossyCodecs[codec]
	at, note := info.Format, ""
	if at.Rate = l.rateFor(at.Rate); at.Rate != info.Format.Rate {
		note = fmt.Sprintf("%s has no sampling rate of %d Hz: it is delivered with %d Hz", format, info.Format.Rate, at.Rate)
	}
	if why := t.cannot(l.encoder, at, l.rates, l.channels); why != "" {
		return flacOrWAV(Info{Format: info.Format, BitDepth: depth}, fmt.Sprintf("%s cannot be written: %s", format, why))
	}
	return Spec{Container: l.container, Codec: codec, BitRate: info.BitRate, Rate: at.Rate, Extension: l.extension}, note
}

// FormatName is that of the file that is written, as Info has it.
func (s Spec) FormatName() string {
	return Info{Container: s.Container, Codec: s.Codec, Video: s.Film != nil && s.Extension != soundOnly[s.Container]}.FormatName()
}

// delivered is the format of the file that is written.
func (s Spec) delivered() audio.Format {
	f := s.Format
	f.Rate = cmp.Or(s.Rate, f.Rate)
	return f
}

// rateFor is the sampling rate a codec has for sound of a rate: the same, the next higher, or its highest.
func (l lossy) rateFor(rate int) int {
	if l.rates == nil {
		return rate
	}
	i, _ := slices.BinarySearch(l.rates, rate)
	return l.rates[min(i, len(l.rates)-1)]
}
