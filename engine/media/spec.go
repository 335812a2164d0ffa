package media

import (
	"fmt"
	"slices"
	"strings"

	"evenshelf/engine/audio"
)

// lossy describes a lossy codec that deliveries may be made in.
type lossy struct {
	encoder   string // FFmpeg's name
	muxer     string
	extension string
	container string
	rates     []int // sampling rates it takes; nil: any
	channels  int   // most it takes
}

var lossyCodecs = map[string]lossy{
	"mp3":    {"libmp3lame", "mp3", ".mp3", "mp3", []int{8000, 11025, 12000, 16000, 22050, 24000, 32000, 44100, 48000}, 2},
	"vorbis": {"libvorbis", "ogg", ".ogg", "ogg", nil, 8},
	"opus":   {"libopus", "ogg", ".opus", "ogg", []int{8000, 12000, 16000, 24000, 48000}, 8},
	"aac":    {"aac", "ipod", ".m4a", "mp4", []int{8000, 11025, 12000, 16000, 22050, 24000, 32000, 44100, 48000, 64000, 88200, 96000}, 8},
}

// SpecFor says how a recording is best delivered: as wished, or in its own format where that can be written, else as
// FLAC, else as WAV, and then Note says why. Integer depths are kept, 8 bits and other odd depths grow to
// the next of 16, 24 and 32: the noise of 8 bits anew, 45 dB under full scale, would be heard in any programme, and
// whatever plays 8 bits plays 16. Lossy bit rates are kept. A film is delivered as a whole, with one sound track levelled.
func (t *Toolbox) SpecFor(info Info, w Wish) Spec {
	own := w.Format == "" || w.Format == formatOf(info)
	if info.isFilm() && (info.Video || own) {
		return t.filmSpec(info, w)
	}
	s, note := t.ownFormat(info)
	if !own {
		s, note = t.inFormat(w.Format, info)
	}
	if info.Others {
		note = joinNotes(note, fmt.Sprintf("there is no room in %s for its other tracks", s.Container))
	}
	s.Format, s.Note, s.Plain, s.Shaped = info.Format, note, w.Plain, w.Shaped
	if w.BitRate != 0 {
		s.BitRate, s.Variable = w.BitRate, false
	}
	return s.withWord(w.Bits)
}

func (t *Toolbox) ownFormat(info Info) (Spec, string) {
	depth := wholeDepth(info.BitDepth)
	switch {
	case info.Container == "wav" && info.Float:
		return wavSpec(info.BitDepth, true), ""
	case info.Container == "wav" && strings.HasPrefix(info.Codec, "pcm_s"), info.Codec == "pcm_u8" && info.Container == "wav":
		return wavSpec(depth, false), ""
	case info.Container == "aiff":
		return aiffSpec(info)
	case info.Float:
		return wavSpec(info.BitDepth, true), fmt.Sprintf("floating-point sound in %s is delivered as WAV", info.Container)
	case info.Codec == "flac" && info.Container == "flac":
		return flacOrWAV(info, "")
	case info.Codec == "alac" && info.Container == "mp4":
		if why := t.cannot("alac", info.Format, nil, 8); why != "" {
			return flacOrWAV(info, "ALAC cannot be written: "+why)
		}
		return Spec{Container: "mp4", Codec: "alac", BitDepth: min(depth, 24), Extension: ".m4a"}, ""
	case info.BitDepth > 0 && info.Container == "wav":
		return wavSpec(depth, false), ""
	case info.BitDepth > 0:
		return flacOrWAV(info, fmt.Sprintf("%s is not written here", info.FormatName()))
	case info.Container == "wav":
		return wavSpec(16, false), fmt.Sprintf("WAV with %s is delivered as 16-bit WAV", info.Codec)
	}
	return t.lossySpec(info)
}

func (t *Toolbox) lossySpec(info Info) (Spec, string) {
	codec, note := info.Codec, ""
	own := lossyCodecs[codec]
	if own.container != info.Container && !(codec == "aac" && info.Container == "aac") {
		codec = "aac"
		note = fmt.Sprintf("%s is not written here", info.FormatName())
	}
	l := lossyCodecs[codec]
	if why := t.cannot(l.encoder, info.Format, l.rates, l.channels); why != "" {
		return flacOrWAV(info, fmt.Sprintf("%s cannot be written: %s", codec, why))
	}
	if codec == "aac" && info.Container == "aac" {
		note = "bare AAC is delivered in M4A"
	}
	s := Spec{Container: l.container, Codec: codec, BitRate: info.BitRate, Extension: l.extension}
	if codec == "mp3" {
		s.Variable, s.Quality = info.Variable, info.Quality
	}
	return s, note
}

// cannot says why an encoder cannot be used for a format, or "". An empty encoder means any FFmpeg does.
func (t *Toolbox) cannot(encoder string, f audio.Format, rates []int, channels int) string {
	usual := audio.UsualLayout(f.Layout.Channels)
	switch {
	case t.FFmpeg() == "":
		return needFFmpeg
	case encoder != "" && !t.encoders()[encoder]:
		return fmt.Sprintf("this FFmpeg has no encoder %s", encoder)
	case rates != nil && !slices.Contains(rates, f.Rate):
		return fmt.Sprintf("it has no sampling rate of %d Hz", f.Rate)
	case f.Layout.Channels > channels:
		return fmt.Sprintf("it has no room for %d channels", f.Layout.Channels)
	case f.Layout.Channels > 2 && encoderLayout(f.Layout) != usual:
		return "it cannot keep these loudspeaker positions"
	}
	return ""
}

// encoderLayout is the layout under which a lossy encoder is handed a signal: to these codecs surrounds
// are surrounds, whether a file calls them side or back.
func encoderLayout(l audio.Layout) audio.Layout {
	const side, back = audio.SideLeft | audio.SideRight, audio.BackLeft | audio.BackRight
	if l.Mask&side == side && l.Mask&back == 0 && l.Channels <= 6 {
		l.Mask = l.Mask&^side | back
	}
	return l
}

func wavSpec(depth int, float bool) Spec {
	if float {
		return Spec{Container: "wav", Codec: fmt.Sprintf("pcm_f%dle", depth), BitDepth: depth, Float: true, Extension: ".wav"}
	}
	return Spec{Container: "wav", Codec: fmt.Sprintf("pcm_s%dle", depth), BitDepth: depth, Extension: ".wav"}
}

// flacOrWAV is the lossless stand-in.
func flacOrWAV(info Info, note string) (Spec, string) {
	if info.Format.Layout.Channels > flacMaxChannels || info.Format.Rate > flacMaxRate {
		return wavSpec(min(wholeDepth(info.BitDepth), 24), false), joinNotes(note, "FLAC has no room for this many channels or this sampling rate")
	}
	return Spec{Container: "flac", Codec: "flac", BitDepth: min(wholeDepth(info.BitDepth), 24), Extension: ".flac"}, note
}

func joinNotes(a, b string) string {
	if a == "" {
		return b
	}
	return a + "; " + b
}

// wholeDepth returns the smallest depth of 16, 24 and 32 that holds so many bits. Lossy codecs have none
// and get 16.
func wholeDepth(bits int) int {
	switch {
	case bits <= 16:
		return 16
	case bits <= 24:
		return 24
	default:
		return 32
	}
}

// vorbisQuality returns the quality that makes about so many bit/s. Vorbis is a quality-driven codec and
// refuses bit rates it does not like, qualities never. The table is its makers' for two channels of
// 44.1 kHz (from memory); other formats are brought to that by their share.
func vorbisQuality(bitRate int, f audio.Format) float64 {
	if bitRate == 0 {
		return 10
	}
	kbps := float64(bitRate) / 1000 * 2 / float64(f.Layout.Channels) * 44100 / float64(f.Rate)
	table := []float64{45, 64, 80, 96, 112, 128, 160, 192, 224, 256, 320, 500} // quality −1 … 10
	for q, r := range table {
		if kbps <= r {
			return float64(q - 1)
		}
	}
	return 10
}

// mp3BitRate returns the lowest bit rate of the format's table that is not below the source's.
func mp3BitRate(bitRate, rate int) int {
	table, most := mpeg1Bits[3], 14
	if rate < 32000 {
		table = mpeg2Bits
	}
	if rate < 16000 {
		most = 8 // 64 kbit/s, MPEG-2.5
	}
	for _, k := range table[1 : most+1] {
		if 1000*k >= bitRate {
			return 1000 * k
		}
	}
	return 1000 * table[most]
}
