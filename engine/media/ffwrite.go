package media

import (
	"context"
	"encoding/binary"
	"fmt"
	"os"
	"strconv"

	"evenshelf/engine/audio"
)

// ffWriter has FFmpeg encode. The sound goes to the child as a WAV stream: float for lossy codecs, which
// do their own rounding, and integers already dithered for lossless ones. The output is the file we
// opened, by its descriptor.
type ffWriter struct {
	child *child
	pack  *packer
	f     *os.File
	carry carrier

	mp3    bool
	frames int64 // written so far
}

func (t *Toolbox) newFFWriter(ctx context.Context, f *os.File, spec Spec, tags *tagSource) (*ffWriter, error) {
	l, isLossy := lossyCodecs[spec.Codec]
	muxer := map[string]string{"flac": "flac", "mp4": "ipod"}[spec.Container]
	pcm := Spec{Format: spec.Format, BitDepth: spec.BitDepth, Plain: spec.Plain, Shaped: spec.Shaped}
	if isLossy {
		muxer = l.muxer
		pcm.BitDepth, pcm.Float = 32, true
	}
	if pcm.Format.Layout.Mask == 0 {
		pcm.Format.Layout = audio.UsualLayout(pcm.Format.Layout.Channels)
	}
	if isLossy {
		pcm.Format.Layout = encoderLayout(pcm.Format.Layout)
	}

	carry, err := t.carrierFor(ctx, spec, tags)
	if err != nil {
		return nil, err
	}
	args := []string{"-nostdin", "-v", "error", "-y", "-f", "wav", "-ignore_length", "1", "-i", "pipe:0", "-map", "0:a:0", "-map_metadata", "-1"}
	args = append(args, carry.args()...)
	args = append(args, t.encoderArgs(spec)...)
	args = append(args, "-fflags", "+bitexact", "-f", muxer, inputFD)
	c, err := startChild(ctx, false, []*os.File{f}, t.ffmpeg, args...)
	if err != nil {
		return nil, err
	}
	w := &ffWriter{child: c, pack: newPacker(pcm), f: f, carry: carry, mp3: spec.Codec == "mp3"}
	if err := w.send(streamHead(pcm)); err != nil {
		c.kill()
		return nil, err
	}
	return w, nil
}

// streamHead returns the head of an endless WAV stream.
func streamHead(spec Spec) []byte {
	b := append([]byte("RIFF\xFF\xFF\xFF\xFFWAVE"), fmtChunk(spec)...)
	return binary.LittleEndian.AppendUint32(append(b, "data"...), unknown32)
}

// encoderArgs chooses the encoder and its quality.
func (t *Toolbox) encoderArgs(spec Spec) []string {
	if spec.Rate != 0 && spec.Rate != spec.Format.Rate {
		spec.Format = spec.delivered()
		return append([]string{"-ar", strconv.Itoa(spec.Rate)}, t.encoderArgs(spec)...)
	}
	rate := strconv.Itoa
	channels := spec.Format.Layout.Channels
	switch spec.Codec {
	case "mp3":
		return append([]string{"-c:a", "libmp3lame"}, mp3Rate(spec)...)
	case "vorbis":
		return []string{"-c:a", "libvorbis", "-q:a", fmt.Sprint(vorbisQuality(spec.BitRate, spec.Format))}
	case "opus":
		bits := spec.BitRate
		if bits == 0 {
			bits = 128_000 * channels
		}
		return []string{"-c:a", "libopus", "-b:a", rate(min(max(bits, 6_000), 256_000*channels))}
	case "aac":
		// Sources of low rate were made with tools (SBR) this encoder lacks: it gets no less than it needs.
		bits := max(spec.BitRate, 64_000*channels)
		if spec.BitRate == 0 {
			bits = 128_000 * channels
		}
		args := []string{"-c:a", "aac", "-b:a", rate(min(bits, 256_000*channels))}
		return append(args, t.exactLength(spec)...)
	case "ac3", "eac3":
		bits, most := max(spec.BitRate, 64_000*channels, 192_000), 640_000
		if spec.Codec == "eac3" { // a frame of 1536 samples has room for 4096 bytes
			most = 4000 * 8 * spec.Format.Rate / 1536
		}
		return []string{"-c:a", spec.Codec, "-b:a", rate(min(bits, most)), "-dialnorm", "-31"} // played as loud as it is
	case "alac":
		return append([]string{"-c:a", "alac"}, t.exactLength(spec)...)
	default:
		return []string{"-c:a", spec.Codec}
	}
}

// mp3Rate chooses a rate of the kind the source has, and no worse a quality.
func mp3Rate(spec Spec) []string {
	// Sound that is easy to code gets less from LAME than the mean asked for, by up to a quarter. Above its limit for
	// means there is little left to vary.
	const headroom, limit = 1.25, 310_000
	mean := int(headroom * float64(spec.BitRate))
	switch {
	case spec.BitRate == 0:
		return []string{"-q:a", "0"}
	case spec.Variable && spec.Quality >= 0:
		return []string{"-q:a", strconv.Itoa(spec.Quality)}
	case spec.Variable && mean <= limit:
		return []string{"-abr", "1", "-b:a", strconv.Itoa(mean)}
	}
	return []string{"-b:a", strconv.Itoa(mp3BitRate(spec.BitRate, spec.Format.Rate))}
}

// exactLength has an MP4 file count its length in frames instead of milliseconds, so that the padding of
// the last packet can be told from sound. Older FFmpegs cannot do it.
func (t *Toolbox) exactLength(spec Spec) []string {
	if !t.since(5, 1) || spec.Container != "mp4" && spec.Container != "mov" {
		return nil
	}
	return []string{"-movie_timescale", strconv.Itoa(spec.Format.Rate)}
}

// since reports whether the FFmpeg in use is of a version or later.
func (t *Toolbox) since(major, minor int) bool {
	var x, y int
	fmt.Sscanf(t.version(), "%d.%d", &x, &y)
	return x > major || x == major && y >= minor
}

func (w *ffWriter) write(src audio.Block) error {
	w.frames += int64(src.Frames())
	return w.send(w.pack.pack(src))
}

// send writes to the child. If the child has ended, its own words are the error.
func (w *ffWriter) send(b []byte) error {
	_, err := w.child.Write(b)
	if err == nil {
		return nil
	}
	if said := w.child.wait(); said != nil {
		return said
	}
	return fmt.Errorf("FFmpeg stopped listening: %w", err)
}

func (w *ffWriter) finish() error {
	if err := w.child.wait(); err != nil {
		return err
	}
	if w.mp3 {
		if err := noteLength(w.f, w.frames); err != nil {
			return err
		}
	}
	return w.carry.finish(w.f)
}

func (w *ffWriter) abort() { w.child.kill() }
