package media

import (
	"context"
	"fmt"
	"io"
	"maps"
	"os"
	"slices"
	"strings"
)

const maxCover = 64 << 20 // bytes

// attachedCover is a picture that is attached to a Matroska film, in a file that has no name any more.
type attachedCover struct {
	f    *os.File
	tags map[string]string
}

// cover takes the picture of a stream out of a film.
func (t *Toolbox) cover(ctx context.Context, src *tagSource, s *probeStream) (attachedCover, error) {
	f, err := os.CreateTemp("", "evenshelf-cover-")
	if err != nil {
		return attachedCover{}, err
	}
	os.Remove(f.Name())
	args := append([]string{"-nostdin", "-v", "error"}, guarded(src.kind)...)
	args = append(args, "-map", fmt.Sprintf("0:%d", s.Index), "-c", "copy", "-frames:v", "1", "-f", "data", "pipe:1")
	c, err := startChild(ctx, true, []*os.File{src.f}, t.ffmpeg, args...)
	if err != nil {
		f.Close()
		return attachedCover{}, err
	}
	n, err := io.Copy(f, io.LimitReader(c, maxCover+1))
	if err == nil && n > maxCover {
		err = fmt.Errorf("%w: its cover picture is larger than %d MiB", ErrUnsupported, maxCover>>20)
	}
	if err != nil {
		c.kill()
	} else {
		err = c.wait()
	}
	if err != nil {
		f.Close()
		return attachedCover{}, err
	}
	return attachedCover{f, s.Tags}, nil
}

// args are FFmpeg's to attach the nth cover, as the attachment of a number; both from 0.
func (c attachedCover) args(n, number int) []string {
	args := []string{"-attach", fmt.Sprintf("file:/dev/fd/%d", 5+n)}
	for _, name := range slices.Sorted(maps.Keys(c.tags)) {
		if value := c.tags[name]; len(value) <= maxTag && !strings.Contains(name, "=") {
			args = append(args, fmt.Sprintf("-metadata:s:t:%d", number), name+"="+strings.ReplaceAll(value, "\x00", ""))
		}
	}
	return args
}
