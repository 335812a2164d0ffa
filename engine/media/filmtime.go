package media

import (
	"context"
	"fmt"
	"os"
	"strconv"
	"strings"
)

// instant is a time in a film as FFmpeg counts it.
type instant struct{ ticks, num, den int64 } // ticks of num/den seconds

func (i instant) seconds() float64 { return float64(i.ticks) * float64(i.num) / float64(i.den) }

// firstSound returns when the first sample of a track is heard that is not the decoder's run-in. Only decoding tells:
// containers say in several ways, or not at all, how much of the first packets is left out.
func (t *Toolbox) firstSound(ctx context.Context, f *os.File, k kind, track int, codec string) (instant, error) {
	args := append([]string{"-nostdin", "-v", "error", "-max_alloc", "268435456", "-copyts"}, decoderArgs(codec, track)...)
	args = append(append(args, guarded(k)...), "-map", fmt.Sprintf("0:a:%d", track-1), "-frames:a", "1", "-f", "framecrc", "pipe:1")
	out, err := t.answer(ctx, f, t.ffmpeg, args)
	if err != nil {
		return instant{}, err
	}
	at := instant{num: 1}
	for line := range strings.Lines(string(out)) {
		if base, ok := strings.CutPrefix(line, "#tb 0: "); ok {
			num, den, _ := strings.Cut(strings.TrimSpace(base), "/")
			at.num, at.den = int64(atoi(num)), int64(atoi(den))
		}
		fields := strings.Split(line, ",") // stream, dts, pts, duration, size, checksum
		if strings.HasPrefix(line, "#") || len(fields) < 4 || at.den <= 0 {
			continue
		}
		if at.ticks, err = strconv.ParseInt(strings.TrimSpace(fields[2]), 10, 64); err == nil {
			return at, nil
		}
	}
	return instant{}, &FormatError{-1, "it cannot be found out when its sound begins"}
}

// runIn is what an encoder puts in front of the sound: so many frames, in packets of so many. MP4 says so, by an edit
// list, and has it skipped, but FFmpeg writes that only where the sound begins with the film. Matroska could say it too,
// but FFmpeg does so for Opus alone. There silence is put in front until the run-in fills whole packets, and these are
// left out, so that the first packet kept begins with the first frame of the sound.
type runIn struct{ frames, packet int }

var runIns = map[string]runIn{"aac": {1024, 1024}, "ac3": {256, 1536}, "eac3": {256, 1536}, "mp3": {1105, 1152}}

// opusRunIn is the look-ahead of libopus, s, that Matroska's time stamps begin with.
const opusRunIn = 0.0065

// entry is how a levelled track is brought in at its time.
type entry struct {
	silence int      // frames in front
	offset  float64  // s, of the first frame that goes in, silence too
	args    []string // FFmpeg's, for the track
}

// entryAt returns how a track of a codec begins at a time, s, in a container, as output sound track n (from 0).
func entryAt(at float64, spec Spec, n int) entry {
	e := entry{offset: at}
	if iso := spec.Container == "mp4" || spec.Container == "mov"; iso && (at <= 0 || runIns[spec.Codec] == runIn{}) {
		return e
	}
	filter := fmt.Sprintf("-bsf:a:%d", n)
	switch r, ok := runIns[spec.Codec]; {
	case ok:
		if spec.Codec == "mp3" && spec.Format.Rate < 32000 {
			r.packet /= 2
		}
		packets := (r.frames + r.packet - 1) / r.packet
		e.silence = packets*r.packet - r.frames
		e.offset -= spec.Format.Seconds(int64(e.silence))
		e.args = []string{filter, fmt.Sprintf("noise=drop=lt(n\\,%d)", packets)}
		if spec.Codec == "mp3" { // whose packets else keep a part of what follows in what is left out
			e.args = append(e.args, fmt.Sprintf("-reservoir:a:%d", n), "0")
		}
	case spec.Codec == "opus":
		e.offset += opusRunIn
	case spec.Codec == "vorbis": // its first packet makes no sound, but comes before the second
		e.args = []string{filter, `setts=pts=max(PTS\,0):dts=max(DTS\,0)`}
	}
	return e
}
