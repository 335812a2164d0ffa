package media

import (
	"os"

	"evenshelf/engine/tags/mp4"
)

// mp4Carrier is the boxes of an MP4 that go into another one. FFmpeg would rename or drop what it has no name for,
// so it writes none of them.
type mp4Carrier struct{ *mp4.Carried }

func (c mp4Carrier) args() []string { return []string{"-map_metadata", "-1", "-map_chapters", "-1"} }

func (c mp4Carrier) finish(f *os.File) error {
	info, err := f.Stat()
	if err != nil {
		return err
	}
	return c.Into(f, info.Size())
}
