package media

import (
	"os"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/mp4"
)

// mp4Carrier is the boxes of an MP4 that go into another one. FFmpeg would rename or drop what it has no name for,
// so it writes none of them.
type mp4Carrier struct{ *mp4.Carried }

func (c mp4Carrier) args() []string { return nil }

func (c mp4Carrier) finish(f *os.File) error {
	info, err := f.Stat()
	if err != nil {
		return err
	}
	return c.Into(f, info.Size())
}

// mp4SheetCarrier is what goes into an MP4 from another format.
type mp4SheetCarrier struct{ sheet tags.Sheet }

func (c mp4SheetCarrier) args() []string { return nil }

func (c mp4SheetCarrier) finish(f *os.File) error {
	info, err := f.Stat()
	if err != nil {
		return err
	}
	return mp4.WriteSheet(f, info.Size(), c.sheet)
}
