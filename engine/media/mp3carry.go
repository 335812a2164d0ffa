package media

import (
	"fmt"
	"io"
	"os"
	"strconv"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// FFmpeg drops frames it has no name for, rewrites texts, and forgets what is behind the sound. So when it encodes an
// MP3 from an MP3, it only leaves room in front of the sound, and the tags are put in afterwards.

// mp3Carrier is the tags that go in front of the sound and behind it.
type mp3Carrier struct{ front, back []byte }

func newMP3Carrier(src *tagSource) (c mp3Carrier, err error) {
	end, err := soundEnd(src.f, src.kind.start, src.size, true)
	if err != nil {
		return c, err
	}
	head, err := readAt(src.f, 0, int(min(src.kind.start, id3.MaxLength)))
	if err != nil {
		return c, err
	}
	from := max(end, src.size-id3.MaxLength)
	tail, err := readAt(src.f, from, int(src.size-from))
	c.front, c.back = id3.Levelled(head, tail)
	return c, err
}

// sheetMP3Carrier puts what a source of another format says in front of the sound.
func sheetMP3Carrier(s tags.Sheet) carrier { return mp3Carrier{front: id3.WriteSheet(s)} }

// args has FFmpeg write an ID3v2 tag of the right length with nothing but padding in it, or none.
func (c mp3Carrier) args() []string {
	args := []string{"-id3v2_version"}
	if len(c.front) == 0 {
		return append(args, "0")
	}
	return append(args, "3", "-metadata_header_padding", strconv.Itoa(len(c.front)-emptyID3))
}

const emptyID3 = 10 // bytes of an ID3v2 tag that holds nothing

func (c mp3Carrier) finish(f *os.File) error {
	room, err := soundStart(f)
	if err != nil {
		return err
	}
	if room != int64(len(c.front)) {
		return fmt.Errorf("FFmpeg left %d bytes for tags of %d", room, len(c.front))
	}
	if _, err := f.WriteAt(c.front, 0); err != nil {
		return err
	}
	end, err := f.Seek(0, io.SeekEnd)
	if err == nil {
		_, err = f.WriteAt(c.back, end)
	}
	return err
}

// soundStart returns where the sound begins in an MP3 as FFmpeg has just written it.
func soundStart(f *os.File) (int64, error) {
	b, err := readAt(f, 0, sniffBytes)
	return id3.HeadLength(b), err
}
