package media

import (
	"cmp"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"evenshelf/engine/audio"
)

// Film says where in a film a delivered sound track goes. Sound tracks are counted from 1, in the order of the file.
type Film struct {
	Track   int    // of the source, which the sound was made from
	InPlace bool   // it takes that track's place; else it is a further one right behind it
	Title   string // of a further track
	Without []int  // tracks of the source that are left out: those an earlier delivery added under the same title
}

// Delivered is the number that the track has in the delivered file; 0, the usual one, where there is no film.
func (f *Film) Delivered() int {
	if f == nil {
		return 0
	}
	n := f.Track
	for _, out := range f.Without {
		if out < f.Track {
			n--
		}
	}
	if f.InPlace {
		return n
	}
	return n + 1
}

// LevelledTitle is the title of the track that levelling by a profile adds to a film.
func LevelledTitle(profile string) string { return levelledPrefix + profile + ")" }

const levelledPrefix = "Levelled ("

// filmKind is a container that films are written in.
type filmKind struct {
	muxer      string
	codecs     []string // in which the levelled track can be; a source's own is kept if it is here
	lossless   string   // for a lossless source whose own it is not
	lossy      string   // for the others
	last       string   // where that has no room for its channels or rate
	extensions []string // the first is the usual one; a source keeps its own of these
}

var isoExtensions = []string{".m4v", ".qt", ".3gp", ".3g2"}

var filmKinds = map[string]filmKind{
	"mp4": {"mp4", []string{"aac", "ac3", "eac3", "mp3", "opus", "flac", "alac"}, "aac", "aac", "flac",
		append([]string{".mp4", ".mov", ".m4a", ".m4b"}, isoExtensions...)},
	"mov": {"mov", []string{"aac", "ac3", "eac3", "mp3", "alac", "pcm_s16le", "pcm_s16be", "pcm_s24le", "pcm_s24be", "pcm_s32le", "pcm_s32be", "pcm_f32le", "pcm_f32be"}, "aac", "aac", "alac",
		append([]string{".mov", ".mp4"}, isoExtensions...)},
	"matroska": {"matroska", []string{"aac", "ac3", "eac3", "mp3", "opus", "vorbis", "flac", "alac", "pcm_s16le", "pcm_s24le", "pcm_s32le", "pcm_f32le"}, "flac", "aac", "flac",
		[]string{".mkv", ".mka", ".mk3d"}},
	"webm": {"webm", []string{"opus", "vorbis"}, "opus", "opus", "vorbis", []string{".webm", ".weba"}},
}

// soundOnly are the extensions of containers of films where there are no pictures.
var soundOnly = map[string]string{"matroska": ".mka", "mp4": ".m4a"}

// isFilm reports whether a recording is delivered as a whole file around one levelled track: films, what has other tracks
// beside the sound, and Matroska also without, whose chapters and tags no other container has room for.
func (i Info) isFilm() bool {
	return i.Video || i.Others || i.Container == "matroska" || i.Container == "webm"
}

// filmContainer is the container that a film is delivered in: its own, or Matroska, which takes nearly everything.
func filmContainer(own string) string {
	if _, ok := filmKinds[own]; ok {
		return own
	}
	return "matroska"
}

// filmSpec says how a film is best delivered.
func (t *Toolbox) filmSpec(info Info, w Wish) Spec {
	container := filmContainer(info.Container)
	kind := filmKinds[container]
	var why []string
	if container != info.Container {
		what := "films"
		if !info.Video {
			what = "several tracks"
		}
		why = append(why, fmt.Sprintf("%s in %s are delivered as Matroska", what, info.Container))
	}
	if w.Format != "" && info.Video {
		why = append(why, fmt.Sprintf("a film stays a film, although %s was asked for", w.Format))
	}
	s := Spec{Container: container, Format: info.Format, Plain: w.Plain, Shaped: w.Shaped, Extension: kind.extensions[0]}
	if ext, ok := soundOnly[container]; ok && !info.Video {
		s.Extension = ext
	}
	usual := kind.lossy
	if info.BitDepth > 0 {
		usual = kind.lossless
	}
	choice := []string{usual, kind.last}
	if slices.Contains(kind.codecs, info.Codec) {
		choice = append([]string{info.Codec}, choice...)
	} else {
		why = append(why, fmt.Sprintf("%s is not written in %s here", info.Codec, container))
	}
	for i, codec := range choice {
		s.Codec = codec
		no := t.cannotInFilm(codec, info.Format)
		if no == "" {
			break
		}
		if i == 0 || codec != choice[i-1] {
			why = append(why, fmt.Sprintf("%s cannot be written: %s", codec, no))
		}
	}
	s.Note = strings.Join(why, "; ")
	if _, isLossy := filmLossy(s.Codec); isLossy {
		s.BitRate = cmp.Or(w.BitRate, info.BitRate)
	} else {
		s.wordInFilm(info, w.Bits)
	}
	s.Film = &Film{Track: max(1, info.Track), InPlace: w.InPlace || !info.Video, Title: w.Title}
	for n, title := range strings.Split(info.Titles, "\n") {
		if !s.Film.InPlace && title == w.Title && n+1 != s.Film.Track {
			s.Film.Without = append(s.Film.Without, n+1)
		}
	}
	return s
}

// wordInFilm sets the word length of a lossless track: as asked for, else the source's.
func (s *Spec) wordInFilm(info Info, bits int) {
	s.BitDepth = wholeDepth(cmp.Or(bits, info.BitDepth))
	pcm := strings.HasPrefix(s.Codec, "pcm_")
	switch {
	case strings.HasPrefix(s.Codec, "pcm_f") && bits == 0:
		s.Float, s.BitDepth = true, 32
	case pcm:
		s.Codec = fmt.Sprintf("pcm_s%d%s", s.BitDepth, s.Codec[len(s.Codec)-2:])
	default:
		s.BitDepth = min(s.BitDepth, 24)
	}
}

// dolby is what AC-3 and E-AC-3 take (ATSC A/52, 5.3.2; FFmpeg writes no more of Annex E), and dolbyMasks the positions
// that they name, beside which there may be a bass channel.
var (
	dolby      = lossy{rates: []int{32000, 44100, 48000}, channels: 6}
	dolbyMasks = []audio.Speaker{0x4, 0x3, 0x103, 0x7, 0x107, 0x603, 0x33, 0x607, 0x37}
)

// filmLossy returns what a lossy codec takes.
func filmLossy(codec string) (l lossy, ok bool) {
	if codec == "ac3" || codec == "eac3" {
		l = dolby
		l.encoder = codec
		return l, true
	}
	l, ok = lossyCodecs[codec]
	return l, ok
}

// cannotInFilm says why a codec cannot be used for a track of a format, or "".
func (t *Toolbox) cannotInFilm(codec string, f audio.Format) string {
	l, isLossy := filmLossy(codec)
	switch {
	case strings.HasPrefix(codec, "pcm_"):
		return t.cannot("", audio.Format{Rate: f.Rate, Layout: audio.Mono}, nil, 1)
	case codec == "flac" && f.Layout.Channels <= flacMaxChannels: // it keeps any positions
		return t.cannot(codec, audio.Format{Rate: f.Rate, Layout: audio.Mono}, nil, 1)
	case !isLossy:
		return t.cannot(codec, f, nil, flacMaxChannels)
	case (codec == "ac3" || codec == "eac3") && slices.Contains(dolbyMasks, f.Layout.Mask&^audio.LowFrequency):
		f.Layout = audio.UsualLayout(f.Layout.Channels)
	}
	return t.cannot(l.encoder, f, l.rates, l.channels)
}

// checkFilm refuses a film that cannot be written.
func (t *Toolbox) checkFilm(s Spec) error {
	kind, ok := filmKinds[s.Container]
	why := t.cannotInFilm(s.Codec, s.Format)
	switch {
	case t.FFmpeg() == "":
		return fmt.Errorf("%w: writing a film needs FFmpeg, and %s", ErrUnsupported, needFFmpeg)
	case !ok || !slices.Contains(kind.codecs, s.Codec):
		return fmt.Errorf("%w: no sound track of %s can be written in %s", ErrUnsupported, s.Codec, s.Container)
	case why != "":
		return fmt.Errorf("%w: a sound track of %s cannot be written: %s", ErrUnsupported, s.Codec, why)
	case s.TagsFrom == "":
		return fmt.Errorf("%w: a film can only be made from a film", ErrUnsupported)
	}
	return nil
}

// choose returns the sound track of a number, or for 0 the one that a film plays by itself: the first marked default,
// else the first. A track that levelling added is none of these, unless there is no other.
func (p *probe) choose(number int) (*probeStream, int, error) {
	sounds := p.sounds()
	switch {
	case len(sounds) == 0:
		return nil, 0, fmt.Errorf("%w: there is no sound in it", ErrUnsupported)
	case number > len(sounds):
		return nil, 0, fmt.Errorf("%w: there is no sound track %d in it, only %d", ErrUnsupported, number, len(sounds))
	case number > 0:
		return sounds[number-1], number, nil
	}
	best := -1
	for n, s := range sounds {
		if !strings.HasPrefix(s.title(), levelledPrefix) && (best < 0 || s.Disposition["default"] > sounds[best].Disposition["default"]) {
			best = n
		}
	}
	best = max(0, best)
	return sounds[best], best + 1, nil
}

// title is what a track is called. MP4 has no other room for it than the name of its handler.
func (s *probeStream) title() string { return cmp.Or(s.Tags["title"], s.Tags["handler_name"]) }

// timed reports whether a track has a place in the course of a film: covers and attachments have none.
func (s *probeStream) timed() bool {
	return (s.Type == "video" || s.Type == "audio" || s.Type == "subtitle") && s.Disposition["attached_pic"] == 0
}

// moovFirst reports whether an MP4 has its index in front of the sound and pictures, so that it plays while it arrives.
func moovFirst(r io.ReaderAt) bool {
	at := int64(0)
	for range 64 {
		head, err := readAt(r, at, 16)
		if err != nil || len(head) < 16 {
			return false
		}
		size := int64(binary.BigEndian.Uint32(head))
		if size == 1 {
			size = int64(min(binary.BigEndian.Uint64(head[8:]), math.MaxInt64/2))
		}
		switch kind := string(head[4:8]); {
		case kind == "moov":
			return true
		case kind == "mdat", size < 8, at > math.MaxInt64/4:
			return false
		}
		at += size
	}
	return false
}
