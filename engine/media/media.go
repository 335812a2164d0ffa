// Package media opens, decodes, encodes and writes recordings.
//
// A recording is recognised by its content, never by its name. WAV (with its 64-bit forms RF64 and BW64)
// and AIFF are read and written here; MP3 and FLAC can be, when there is nothing better; everything else goes
// through FFmpeg. FFmpeg runs as a child process, because a parser of hostile files belongs in a process
// of its own: it is handed an open file instead of a name, it is told which demuxer to use instead of
// being left to guess, and what it may open is an allow-list. A playlist that pretends to be a recording
// is refused before FFmpeg ever sees it.
//
// The sound travels between the two processes as a WAV stream on a pipe, in both directions: the stream
// says for itself what rate, channels and loudspeaker positions it has, so nothing depends on options
// that differ between FFmpeg's versions.
//
// Every decoder delivers planar float32. An integer sample of b bits is divided by 2^(b−1), so full scale
// is −1 … just under +1, and integers of up to 24 bits come through exactly. Lossy codecs and float PCM
// may pass ±1.0; such overs are kept.
package media

import (
	"strings"

	"evenshelf/engine/audio"
)

// Info is what a media file says about its sound.
type Info struct {
	Container string // "wav", "flac", "mp3", "ogg", "mp4", …
	Codec     string // "pcm_s16le", "pcm_f32le", "flac", "mp3", "vorbis", "opus", "aac", …
	Format    audio.Format
	Frames    int64  // as the header promises; −1 if it does not
	BitDepth  int    // bits a sample of integer or float PCM and FLAC; 0 for lossy codecs
	Float     bool   // floating-point PCM
	BitRate   int    // bit/s of a lossy stream, on average; 0 if not known
	Variable  bool   // the bit rate of an MP3 varies
	Quality   int    // LAME's quality of such, 0 (best) to 9; −1 if not stated
	Track     int    // which of the sound tracks it is, from 1; 0 where there can be but one
	Titles    string // of all sound tracks, a line each, empty without one; "" where there can be but one
	Mixed     bool   // Format is that of a mix of more channels to two (see Downmix)
	Video     bool   // there are moving pictures beside the sound (cover art does not count)
	Others    bool   // there are other tracks beside it: further sound, subtitles, attached files
	Decoder   string // who decodes it, with version, e.g. "ffmpeg 5.1.6 mp3float"
}

// FormatName is the short name people use: "wav", "flac", "mp3", "ogg vorbis", "opus", "m4a aac", ….
func (i Info) FormatName() string {
	container := i.Container
	if container == "mp4" && !i.Video {
		container = "m4a"
	}
	switch {
	case container == "ogg" && i.Codec == "opus":
		return "opus"
	case i.Codec == "" || i.Codec == container || strings.HasPrefix(i.Codec, "pcm_"):
		return container
	default:
		return container + " " + i.Codec
	}
}

// Reader is an open recording. It reads frames in order, once.
//
// ReadBlock's errors besides io.EOF begin with the file's path and name it only there. One that wraps io.ErrUnexpectedEOF says the recording
// is torn: every frame that could be had was delivered first. Close may be called at any time and more
// than once; it ends a decoder that is still running.
type Reader interface {
	audio.Source
	Info() Info
	Close() error
}

// Damaged is implemented by readers whose decoder can meet damage and carry on. Once ReadBlock has
// returned io.EOF, or an error that wraps io.ErrUnexpectedEOF, Damage says in a line or two what the decoder
// complained about, or "" if it was content; before that it is "". With io.EOF the recording has been read to its
// end, but some of what was delivered may be silence, noise or a splice. With the error, frames are missing, and the
// place may be the end, where a cut makes a decoder complain too, or one inside: Damage does not tell them apart.
type Damaged interface{ Damage() string }

// Spec says how a delivered file is to be written.
type Spec struct {
	Container string
	Codec     string
	Format    audio.Format
	BitDepth  int // integer PCM and FLAC: 8, 16, 24, 32; float PCM: 32, 64
	Float     bool
	Plain     bool // integers are rounded as they are, without dither
	Shaped    bool // the noise of dither is shaped
	BitRate   int  // bit/s for lossy codecs, 0 for the codec's best quality
	Variable  bool // the bit rate of an MP3 varies: after Quality, or if that is −1 about BitRate
	Quality   int
	Extension string // of the delivered file, with its dot: ".wav"
	Rate      int    // of a lossy file, Hz, where the codec has not the source's; 0: that of Format
	Note      string // why this is not the source's own format, or empty
	Film      *Film  // where in a film it goes; nil: it is delivered by itself
	TagsFrom  string // path of the file whose tags and chunks are carried over, or empty
	History   string // what made the file, for the line that a bext chunk's coding history gets; empty: no line
}
