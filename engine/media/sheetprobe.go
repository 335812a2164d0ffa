package media

import (
	"context"
	"fmt"
	"io"
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"evenshelf/engine/tags"
)

// probeChapter is a chapter as ffprobe tells it.
type probeChapter struct {
	TimeBase string            `json:"time_base"`
	Start    int64             `json:"start"`
	End      int64             `json:"end"`
	Tags     map[string]string `json:"tags"`
}

// generic are FFmpeg's own names of what a Sheet names otherwise, and those of ASF that it passes on as they are.
var generic = map[string]string{
	"ALBUM_ARTIST": "ALBUMARTIST", "ALBUM ARTIST": "ALBUMARTIST", "TRACK": "TRACKNUMBER", "DISC": "DISCNUMBER", "TOTALTRACKS": "TRACKTOTAL", "TOTALDISCS": "DISCTOTAL", "YEAR": "DATE", "TSRC": "ISRC", "TBPM": "BPM", "TEMPO": "BPM",
	"WM/ISRC": "ISRC", "WM/BEATSPERMINUTE": "BPM", "WM/YEAR": "DATE", "WM/LYRICS": "LYRICS", "WM/CONDUCTOR": "CONDUCTOR",
	"WM/MOOD": "MOOD", "WM/SUBTITLE": "SUBTITLE", "WM/BARCODE": "BARCODE", "WM/CATALOGNO": "CATALOGNUMBER", "WM/WRITER": "LYRICIST",
	"WM/ALBUMSORTORDER": "ALBUMSORT", "WM/ARTISTSORTORDER": "ARTISTSORT", "WM/TITLESORTORDER": "TITLESORT",
	"WM/CONTENTGROUPDESCRIPTION": "GROUPING", "WM/INITIALKEY": "INITIALKEY", "WM/PRODUCER": "PRODUCER", "WM/MODIFIEDBY": "REMIXER",
}

// probeSheet asks FFmpeg what a recording carries. Of several values of one name it knows one.
func (t *Toolbox) probeSheet(ctx context.Context, src *tagSource) (s tags.Sheet, err error) {
	p, err := t.runProbe(ctx, src.f, src.kind, "-show_chapters")
	if err != nil {
		return s, err
	}
	named := map[string]string{}
	leaveOut := technical
	if slices.Contains([]string{"flac", "ogg", "mp3"}, src.kind.container) {
		leaveOut = technical[:1]
	}
	if sound := p.sound(); sound != nil { // Ogg keeps its tags on the stream, the others on the file
		keepTags(named, sound.Tags, leaveOut)
		if language := sound.Tags["language"]; src.kind.demuxer == "mov" && language != "und" {
			s.Add("LANGUAGE", language)
		}
	}
	keepTags(named, p.Format.Tags, leaveOut)
	for _, name := range slices.Sorted(maps.Keys(named)) {
		addProbed(&s, name, named[name])
	}
	for _, ch := range p.Chapters {
		if start, ok := ch.at(ch.Start); ok {
			end, _ := ch.at(ch.End)
			s.Chapters = append(s.Chapters, tags.Chapter{Start: start, End: end, Title: ch.Tags["title"]})
		}
	}
	s.Pictures, err = t.probePictures(ctx, src, p)
	return s, err
}

func addProbed(s *tags.Sheet, name, value string) {
	name = strings.ToUpper(name)
	if other, ok := generic[name]; ok {
		name = other
	} else if strings.HasPrefix(name, "LYRICS-") { // the language follows
		name = "LYRICS"
	} else {
		name = tags.FromWords(strings.ReplaceAll(name, "/", " "))
	}
	switch {
	case name == "TRACKNUMBER":
		s.AddNumber(name, "TRACKTOTAL", value)
	case name == "DISCNUMBER":
		s.AddNumber(name, "DISCTOTAL", value)
	case !slices.Contains(s.Values(name), value): // it may have two names for one thing
		s.Add(name, value)
	}
}

// at converts a time in units of the chapter; ok is false if it is none.
func (c probeChapter) at(n int64) (time.Duration, bool) {
	var num, den int64
	if _, err := fmt.Sscanf(c.TimeBase, "%d/%d", &num, &den); err != nil || n < 0 || num < 1 || num > math.MaxInt32 || den < 1 || den > 1e9 || n > math.MaxInt64/num {
		return 0, false
	}
	whole, rest := n*num/den, n*num%den
	if whole > 1<<32 {
		return 0, false
	}
	return time.Duration(whole)*time.Second + time.Duration((rest*int64(time.Second)+den/2)/den), true
}

// pictureKinds are FFmpeg's names of what pictures show, by the numbers of Picture.Kind.
var pictureKinds = []string{
	"Other", "32x32 pixels 'file icon'", "Other file icon", "Cover (front)", "Cover (back)", "Leaflet page", "Media (e.g. label side of CD)",
	"Lead artist/lead performer/soloist", "Artist/performer", "Conductor", "Band/Orchestra", "Composer", "Lyricist/text writer", "Recording Location",
	"During recording", "During performance", "Movie/video screen capture", "A bright coloured fish", "Illustration", "Band/artist logotype", "Publisher/Studio logotype",
}

const maxPictures = 32 // each costs a start of FFmpeg

// probePictures takes the pictures out of a recording. What is larger than any picture, or of no known kind, is left out.
func (t *Toolbox) probePictures(ctx context.Context, src *tagSource, p *probe) (list []tags.Picture, err error) {
	for _, s := range p.Streams {
		if s.Type != "video" || s.Disposition["attached_pic"] != 1 || len(list) == maxPictures {
			continue
		}
		cover, err := t.cover(ctx, src, &s)
		if stop := stopped(ctx)(); stop != nil {
			return nil, stop
		} else if err != nil {
			continue
		}
		size, err := cover.f.Seek(0, io.SeekEnd)
		if err == nil {
			data := make([]byte, size)
			if _, err = cover.f.ReadAt(data, 0); err == nil && tags.MIME(data) != "" {
				list = append(list, tags.Picture{Kind: max(0, slices.Index(pictureKinds, s.Tags["comment"])), MIME: tags.MIME(data), Description: s.Tags["title"], Data: data})
			}
		}
		if cover.f.Close(); err != nil {
			return nil, err
		}
	}
	if len(list) == 1 && list[0].Kind == 0 { // the only one is what players show
		list[0].Kind = tags.FrontCover
	}
	return list, nil
}
