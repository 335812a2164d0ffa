package media

import (
	"os"
	"slices"
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
	said tags.Sheet  // what a WAV or AIFF made from another format carries
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
