package media

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"evenshelf/engine/tags"
)

const (
	maxFilmInputs = 32   // times that a film is opened; what is over that shares the last
	maxFilmTracks = 1000 // with fonts; files with more are made to hurt
	maxCovers     = 20
	startSlack    = 0.0015 // s: Matroska counts in milliseconds
	leadSlack     = 0.008  // s by which the stamps of Opus and Vorbis come before the sound
	orderSlack    = 0.1    // s: AVI says when pictures are decoded; they are shown a few later where some refer forward
	noOffset      = 1e-6   // s: less than any time stamp says, but not none
)

// filmOptions puts together what FFmpeg is told to make a film.
type filmOptions struct {
	t      *Toolbox
	ctx    context.Context
	src    *tagSource
	spec   Spec
	source *probeStream
	at     float64 // s, when the sound begins
	begin  float64 // s, when the source does, by which all time stamps are moved back; 0 if they are kept
	same   bool    // the container is the source's

	inputs []string // the film's, from input 1 on
	opened int      // how many they are
	sparse int      // the input of what has packets only now and then; 0: none yet
	maps   []string
	tracks []string // options of single tracks
	counts map[string]int
	entry  entry
	covers []attachedCover
	expect []expected
}

// build returns FFmpeg's arguments.
//
// FFmpeg reads next from the input of which a track is furthest behind. A track that ended, or has packets only now and
// then, would have all the film read past it, and what is read then is written long before the sound that belongs beside
// it. So each track reads the film for itself, and all that is sparse together once more: it is read ahead, but small.
func (o *filmOptions) build(p *probe) ([]string, error) {
	if len(p.Streams) > maxFilmTracks {
		return nil, fmt.Errorf("%w: no film has %d tracks", ErrUnsupported, len(p.Streams))
	}
	o.counts = map[string]int{}
	sound := 0
	for i := range p.Streams {
		s := &p.Streams[i]
		if s.Type == "audio" {
			sound++
		}
		switch {
		case s == o.source && o.spec.Film.InPlace:
			o.addLevelled()
			continue
		case s.Type == "audio" && slices.Contains(o.spec.Film.Without, sound), !o.takes(s):
			continue
		}
		if err := o.copy(s, sound); err != nil {
			return nil, err
		}
		if s == o.source {
			o.addLevelled()
		}
	}
	for n, c := range o.covers {
		o.tracks = append(o.tracks, c.args(n, o.counts["attachment"]+n)...)
	}
	if o.opened == 0 { // for its tags and chapters
		o.open(0)
	}
	args := []string{"-nostdin", "-v", "error", "-y"}
	if o.same {
		args = append(args, "-copyts")
	}
	args = append(args, "-itsoffset", fmt.Sprintf("%.6f", o.entry.offset), "-f", "wav", "-ignore_length", "1", "-i", "pipe:0")
	args = append(append(args, o.inputs...), "-map_metadata", "1", "-map_chapters", "1")
	args = append(append(args, o.maps...), "-c", "copy", "-copypriorss", "1", "-copyinkf", "-max_interleave_delta", "2000000", "-strict", "-2")
	args = append(append(args, o.tracks...), o.tagArgs(p)...)
	args = append(args, "-fflags", "+bitexact", "-f", filmKinds[o.spec.Container].muxer, "file:/dev/fd/4")
	return args, nil
}

// open opens the film once more, its time stamps moved by some seconds, and returns the input's number. Where FFmpeg moves
// time stamps back, it does so in some containers (MPEG-TS and PS) to the begin not of the film but of what is taken from
// the input, a track here; but not once there is an offset, however small.
func (o *filmOptions) open(offset float64) int {
	if o.opened == maxFilmInputs {
		return maxFilmInputs
	}
	if !o.same {
		offset += noOffset
	}
	if offset != 0 {
		if o.opened == 0 && o.same { // the first one's chapters would be moved too
			o.open(0)
		}
		o.inputs = append(o.inputs, "-itsoffset", fmt.Sprintf("%.6f", offset))
	}
	if !o.same {
		o.inputs = append(o.inputs, "-fflags", "+genpts")
	}
	o.inputs = append(o.inputs, guarded(o.src.kind)...)
	o.opened++
	return o.opened
}

func (o *filmOptions) matroska() bool {
	return o.spec.Container == "matroska" || o.spec.Container == "webm"
}

// takes reports whether the container has room for a track. FFmpeg makes those of chapters and time code anew, from what
// it reads of them; of other data it can write but one kind.
func (o *filmOptions) takes(s *probeStream) bool {
	switch s.Type {
	case "video", "audio", "subtitle":
		return true
	case "attachment":
		return o.spec.Container == "matroska"
	case "data":
		return s.CodecTag == "gpmd" && !o.matroska()
	}
	return false
}

// copy has a track copied; sound is how many sound tracks there are up to it.
func (o *filmOptions) copy(s *probeStream, sound int) error {
	input := 0
	picture := s.Type == "video" && s.Disposition["attached_pic"] == 1
	switch {
	case picture && o.spec.Container == "matroska" && len(o.covers) == maxCovers:
		return fmt.Errorf("%w: no film has more than %d cover pictures", ErrUnsupported, maxCovers)
	case picture && o.spec.Container == "matroska":
		c, err := o.t.cover(o.ctx, o.src, s) // FFmpeg would make it a film of one picture
		if err == nil {
			o.covers = append(o.covers, c)
		}
		return err
	case s.Type == "video", s.Type == "audio":
		offset := 0.0
		if s.Codec == "opus" && s.Type == "audio" && o.same && o.matroska() {
			lead, err := o.lead(s, sound)
			if err != nil {
				return err
			}
			offset = lead
		}
		input = o.open(offset)
	default:
		if o.sparse == 0 {
			o.sparse = o.open(0)
		}
		input = o.sparse
	}
	o.maps = append(o.maps, "-map", fmt.Sprintf("%d:%d", input, s.Index))
	o.counts[s.Type]++
	if s.timed() {
		e := expected{kind: s.Type, codec: s.Codec, start: math.NaN()}
		if start, err := strconv.ParseFloat(s.Start, 64); err == nil && s.Type != "subtitle" {
			e.start, e.slack = start-o.begin, startSlack
			switch {
			case o.src.kind.container == "avi" && s.Type == "video":
				e.slack = orderSlack
			case !o.same && (s.Codec == "opus" || s.Codec == "vorbis"): // what leads is counted in one container and not in another
				e.slack = 2 * leadSlack
			}
		}
		o.expect = append(o.expect, e)
	}
	return nil
}

// lead is by how much the time stamps of an Opus track, the sound track of a number, come before its sound, s, in whole
// milliseconds. Reading Matroska, FFmpeg takes that off; writing, it does not put it on again.
func (o *filmOptions) lead(s *probeStream, number int) (float64, error) {
	start, err := strconv.ParseFloat(s.Start, 64)
	if err != nil {
		return 0, nil // there is nothing in it
	}
	at, err := o.t.firstSound(o.ctx, o.src.f, o.src.kind, number, s.Codec)
	return math.Floor((at.seconds()-start)*1000+0.5+1e-6) / 1000, err
}

// addLevelled has the sound from the pipe encoded as the next track.
func (o *filmOptions) addLevelled() {
	n := o.counts["audio"]
	o.counts["audio"]++
	o.maps = append(o.maps, "-map", "0:a:0")
	for _, arg := range o.t.encoderArgs(o.spec) {
		if strings.HasPrefix(arg, "-") && strings.HasSuffix(arg, ":a") {
			arg += fmt.Sprintf(":%d", n)
		}
		o.tracks = append(o.tracks, arg)
	}
	o.entry = entryAt(o.at, o.spec, n)
	o.tracks = append(o.tracks, o.entry.args...)
	film := o.spec.Film
	kept := []string{}
	for name, on := range o.source.Disposition {
		if on == 1 && (film.InPlace || name != "default" && name != "forced") {
			kept = append(kept, name)
		}
	}
	slices.Sort(kept)
	disposition := strings.Join(kept, "+")
	if disposition == "" {
		disposition = "0"
	}
	o.tracks = append(o.tracks, fmt.Sprintf("-disposition:a:%d", n), disposition)
	meta := fmt.Sprintf("-metadata:s:a:%d", n)
	for _, pair := range o.trackTags() {
		o.tracks = append(o.tracks, meta, pair[0]+"="+pair[1])
	}
	slack := leadSlack
	if o.spec.Codec == "vorbis" { // whose first packet has a stamp but no sound
		slack += o.spec.Format.Seconds(512)
	}
	o.expect = append(o.expect, expected{kind: "audio", codec: o.spec.Codec, start: o.at, slack: slack})
}

// trackTags are the tags of the levelled track, sorted: in place those of its source, but for what counts its packets or
// states its level; else a title and the language.
func (o *filmOptions) trackTags() [][2]string {
	kept := map[string]string{}
	if !o.spec.Film.InPlace {
		kept["title"], kept["handler_name"] = o.spec.Film.Title, o.spec.Film.Title
		if o.matroska() {
			delete(kept, "handler_name")
		}
		if language := o.source.Tags["language"]; language != "" {
			kept["language"] = language
		}
	} else {
		named := map[string]string{}
		for name, value := range o.source.Tags {
			base, _, _ := strings.Cut(name, "-") // a language may follow: "BPS-eng"
			if !slices.Contains(counted, strings.ToLower(base)) {
				named[name] = value
			}
		}
		keepTags(kept, named, nil)
	}
	pairs := [][2]string{}
	for name, value := range kept {
		pairs = append(pairs, [2]string{name, value})
	}
	slices.SortFunc(pairs, func(a, b [2]string) int { return strings.Compare(a[0], b[0]) })
	return pairs
}

// counted are tags that describe the packets of a track, or who made them.
var counted = []string{"encoder", "vendor_id", "duration", "number_of_frames", "number_of_bytes", "bps"}

// tagArgs are the options of the container, and those that take off what no longer is true of the whole file.
func (o *filmOptions) tagArgs(p *probe) (args []string) {
	var flags []string
	if moovFirst(o.src.f) {
		flags = append(flags, "faststart")
	}
	apple := false // the keys of cameras, which the other kind of tags has no room for
	for name := range p.Format.Tags {
		apple = apple || strings.HasPrefix(name, "com.")
		if o.spec.Film.InPlace && tags.Stale(name) && !strings.Contains(name, "=") {
			args = append(args, "-metadata", name+"=")
		}
	}
	slices.Sort(args)
	if apple {
		flags = append(flags, "use_metadata_tags")
	}
	switch {
	case o.matroska():
		args = append(args, "-default_mode", "passthrough", "-avoid_negative_ts", "disabled")
	case len(flags) > 0:
		args = append(args, "-movflags", "+"+strings.Join(flags, "+"))
	}
	return args
}
