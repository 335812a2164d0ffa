package media

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"slices"
	"strconv"
	"strings"

	"evenshelf/engine/audio"
)

// inputFD is the name under which a child finds the file we opened for it as descriptor 3. Opened this
// way it can seek, which a pipe cannot, and no path of ours is ever taken for an option or a URL.
const inputFD = "file:/dev/fd/3"

// guarded are the options that stand for every input FFmpeg is given, the last of which names it. What is behind
// the end of the sound is kept from it, and what is in front of MPEG audio, where it would look for a frame in whatever it
// does not know: only numbers are added to the name.
func guarded(k kind) []string {
	protocols, name := "file,pipe", inputFD
	if k.end > 0 {
		start := int64(0)
		if k.container == "mp3" {
			start = k.start
		}
		protocols, name = protocols+",subfile", fmt.Sprintf("subfile,,start,%d,end,%d,,:%s", start, k.end, inputFD)
	}
	return []string{"-protocol_whitelist", protocols, "-f", k.demuxer, "-i", name}
}

// probe is what ffprobe says about a file, as far as it matters here.
type probe struct {
	Streams  []probeStream  `json:"streams"`
	Chapters []probeChapter `json:"chapters"`
	Format   struct {
		Start    string            `json:"start_time"`
		Duration string            `json:"duration"`
		BitRate  string            `json:"bit_rate"`
		Tags     map[string]string `json:"tags"`
	} `json:"format"`
}

type probeStream struct {
	Index       int               `json:"index"`
	Type        string            `json:"codec_type"`
	Codec       string            `json:"codec_name"`
	CodecTag    string            `json:"codec_tag_string"`
	SampleFmt   string            `json:"sample_fmt"`
	SampleRate  string            `json:"sample_rate"`
	Channels    int               `json:"channels"`
	TimeBase    string            `json:"time_base"`
	Start       string            `json:"start_time"`
	DurationTS  int64             `json:"duration_ts"`
	BitRate     string            `json:"bit_rate"`
	RawBits     string            `json:"bits_per_raw_sample"`
	Bits        int               `json:"bits_per_sample"`
	Width       int               `json:"width"`
	Height      int               `json:"height"`
	Disposition map[string]int    `json:"disposition"`
	Tags        map[string]string `json:"tags"`
}

// runProbe asks ffprobe about an open file; more are options that ask for more.
func (t *Toolbox) runProbe(ctx context.Context, f *os.File, k kind, more ...string) (*probe, error) {
	args := append([]string{"-v", "error", "-of", "json", "-show_streams", "-show_format"}, more...)
	out, err := t.answer(ctx, f, t.ffprobe, append(args, guarded(k)...))
	if err != nil {
		return nil, err
	}
	var p probe
	if err := json.Unmarshal(out, &p); err != nil {
		return nil, fmt.Errorf("FFmpeg's answer is not understood: %w", err)
	}
	return &p, nil
}

// answer runs a tool on an open file and returns what it says, which may be no more than 8 MiB.
func (t *Toolbox) answer(ctx context.Context, f *os.File, tool string, args []string) ([]byte, error) {
	ctx, cancel := context.WithTimeoutCause(ctx, stallLimit, fmt.Errorf("FFmpeg took more than %v to look at it", stallLimit))
	defer cancel()
	c, err := startChild(ctx, true, []*os.File{f}, tool, args...)
	if err != nil {
		return nil, err
	}
	out := bytes.Buffer{}
	const limit = 8 << 20
	buf := make([]byte, 32<<10)
	for out.Len() < limit {
		n, err := c.Read(buf)
		out.Write(buf[:n])
		if err != nil {
			break
		}
	}
	if out.Len() >= limit {
		c.kill()
		return nil, &FormatError{-1, "its tags are larger than any recording's"}
	}
	if err := c.wait(); err != nil {
		if stop := stopped(ctx)(); stop != nil {
			return nil, stop
		}
		if errors.Is(err, ErrKilled) {
			return nil, err
		}
		return nil, &FormatError{-1, "the file cannot be read: " + err.Error()}
	}
	return out.Bytes(), nil
}

// start is when a film begins, s; 0 if it does not say.
func (p *probe) start() float64 {
	start, err := strconv.ParseFloat(p.Format.Start, 64)
	if err != nil {
		return 0
	}
	return start
}

// sounds returns the sound streams.
func (p *probe) sounds() []*probeStream {
	var list []*probeStream
	for i := range p.Streams {
		if p.Streams[i].Type == "audio" {
			list = append(list, &p.Streams[i])
		}
	}
	return list
}

// sound returns the first sound stream, or nil.
func (p *probe) sound() *probeStream {
	if all := p.sounds(); len(all) > 0 {
		return all[0]
	}
	return nil
}

func (p *probe) video() bool {
	for _, s := range p.Streams {
		if s.Type == "video" && s.Disposition["attached_pic"] == 0 {
			return true
		}
	}
	return false
}

// info turns the answer into an Info of one sound track (see choose), but for Decoder.
func (p *probe) info(k kind, number int) (Info, *probeStream, error) {
	s, number, err := p.choose(number)
	if err != nil {
		return Info{}, nil, err
	}
	info := Info{Container: k.container, Codec: s.Codec, Frames: -1, Video: p.video(), Track: number}
	sounds := p.sounds()
	titles := make([]string, len(sounds))
	for i, s := range sounds {
		titles[i] = strings.ReplaceAll(s.title(), "\n", " ")
	}
	info.Titles = strings.Join(titles, "\n")
	info.Others = len(sounds) > 1 || slices.ContainsFunc(p.Streams, func(s probeStream) bool { return s.Type == "subtitle" || s.Type == "attachment" })
	info.Format = audio.Format{Rate: atoi(s.SampleRate), Layout: audio.UsualLayout(s.Channels)}
	if err := checkFormat(info.Format, -1); err != nil {
		return Info{}, nil, err
	}
	switch {
	case strings.HasPrefix(s.Codec, "pcm_f"):
		info.Float, info.BitDepth = true, s.Bits
	case lossless[s.Codec] || strings.HasPrefix(s.Codec, "pcm_s") || strings.HasPrefix(s.Codec, "pcm_u"):
		if info.BitDepth = atoi(s.RawBits); info.BitDepth == 0 {
			info.BitDepth = s.Bits
		}
		if info.BitDepth == 0 && strings.HasPrefix(s.SampleFmt, "s16") {
			info.BitDepth = 16
		} else if info.BitDepth == 0 {
			info.BitDepth = 24
		}
	default:
		if info.BitRate = cmp.Or(atoi(s.BitRate), atoi(s.Tags["BPS"])); info.BitRate == 0 && !info.Video && len(sounds) == 1 {
			info.BitRate = atoi(p.Format.BitRate)
		}
	}
	if counts[k.container] && s.DurationTS > 0 && s.TimeBase == "1/"+s.SampleRate {
		info.Frames = s.DurationTS
	}
	return info, s, nil
}

// wire says how the decoder's samples are best handed on (see wire16).
func (s *probeStream) wire() string {
	switch s.SampleFmt {
	case "u8", "u8p", "s16", "s16p":
		return wire16
	case "s32", "s32p":
		return wire32
	default:
		return wireFloat
	}
}

// lossless codecs besides PCM, by FFmpeg's names.
var lossless = map[string]bool{"flac": true, "alac": true, "wavpack": true, "ape": true, "tta": true, "tak": true, "mlp": true, "truehd": true}

// counts names the containers whose duration is a count of frames; in the others FFmpeg estimates it or
// it is kept in milliseconds.
var counts = map[string]bool{
	"flac": true, "ogg": true, "mp4": true, "mov": true, "aiff": true, "caf": true, "au": true, "w64": true, "wav": true,
	"wv": true, "ape": true,
}

// atoi returns 0 for what is not a number: ffprobe leaves out or writes "N/A" for what it does not know.
func atoi(s string) int {
	n, err := strconv.Atoi(s)
	if err != nil || n < 0 {
		return 0
	}
	return n
}
