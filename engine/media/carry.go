package media

import (
	"context"
	"fmt"
	"maps"
	"os"
	"slices"
	"strconv"
	"strings"

	"evenshelf/engine/tags"
)

// tagSource is the recording whose tags, chunks and pictures a delivery carries on. A nil tagSource
// carries nothing; every method works on it.
type tagSource struct {
	f    *os.File
	size int64
	kind kind
	wav  *wavHeader  // nil if it is not WAV
	aiff *aiffHeader // nil if it is not AIFF
}

// openTags opens the file tags are taken from; "" gives nil.
func openTags(path string) (*tagSource, error) {
	if path == "" {
		return nil, nil
	}
	f, size, err := openRegular(path)
	if err != nil {
		return nil, about(path, err)
	}
	t := &tagSource{f: f, size: size}
	t.kind, err = sniff(f)
	switch {
	case err != nil:
	case t.kind.container == "wav":
		t.wav, err = parseWAV(f, size)
	case t.kind.container == "aiff" && t.kind.start == 0:
		t.aiff, err = parseAIFF(f, size)
	}
	if err != nil {
		f.Close()
		return nil, about(path, err)
	}
	return t, nil
}

func (t *tagSource) close() {
	if t != nil {
		t.f.Close() // it was only read
	}
}

// is reports whether a path leads to the very file tags are taken from.
func (t *tagSource) is(path string) bool {
	if t == nil {
		return false
	}
	mine, err1 := t.f.Stat()
	other, err2 := os.Stat(path)
	return err1 == nil && err2 == nil && os.SameFile(mine, other)
}

// technical tags describe the file they were in, not the recording. Where people name the tags, as in FLAC,
// Ogg and MP3, the names after the first mean what they say and are kept.
var technical = []string{
	"encoder", "major_brand", "minor_version", "compatible_brands", "handler_name", "vendor_id", "language",
	"duration", "creation_time", "number_of_frames", "number_of_bytes", "bps",
}

const maxTag = 100 << 10 // bytes; the system limits one argument of a command to 128 KiB

// ffmpegTags returns FFmpeg's options, in front of the output, for the tags, chapters and pictures of the
// source, which must be input 1.
func (t *Toolbox) ffmpegTags(ctx context.Context, src *tagSource) ([]string, error) {
	if src == nil {
		return []string{"-map_metadata", "-1"}, nil
	}
	p, err := t.runProbe(ctx, src.f, src.kind)
	if err != nil {
		return nil, err
	}
	args := []string{"-map_metadata", "-1", "-map_chapters", "1"}
	kept := map[string]string{}
	leaveOut := technical
	if slices.Contains([]string{"flac", "ogg", "mp3"}, src.kind.container) {
		leaveOut = technical[:1]
	}
	if s := p.sound(); s != nil { // Ogg keeps its tags on the stream, the others on the file
		keepTags(kept, s.Tags, leaveOut)
		if language := s.Tags["language"]; src.kind.demuxer == "mov" && language != "" {
			args = append(args, "-metadata:s:a:0", "language="+language)
		}
	}
	keepTags(kept, p.Format.Tags, leaveOut)
	for _, name := range slices.Sorted(maps.Keys(kept)) {
		args = append(args, "-metadata", name+"="+kept[name])
	}
	for n, picture := range p.pictures() {
		args = append(args, "-map", "1:"+strconv.Itoa(picture.Index))
		for _, name := range []string{"comment", "title"} { // what it shows: "Cover (front)"; and a caption
			if value := picture.Tags[name]; value != "" && len(value) <= maxTag {
				args = append(args, fmt.Sprintf("-metadata:s:v:%d", n), name+"="+strings.ReplaceAll(value, "\x00", ""))
			}
		}
	}
	args = append(args, "-c:v", "copy", "-disposition:v", "attached_pic")
	return args, nil
}

func keepTags(dst, src map[string]string, leaveOut []string) {
	for name, value := range src {
		name, value = strings.ReplaceAll(name, "\x00", ""), strings.ReplaceAll(value, "\x00", "")
		lower := strings.ToLower(name)
		if name == "" || strings.Contains(name, "=") || len(value) > maxTag || tags.Stale(name) || slices.Contains(leaveOut, lower) || strings.HasPrefix(lower, "_statistics") {
			continue
		}
		dst[name] = value
	}
}
