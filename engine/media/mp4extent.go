package media

import (
	"os"

	"evenshelf/engine/tags/mp4"
)

// takeExtent finds out where the sound of an MP4 is. FFmpeg's reading of an edit list is good to a packet only, and of
// one that counts in milliseconds, as most do, to a millisecond: it would lose a packet that begins in the last one.
// What reaches behind the sound is left out as every codec's padding is; of a lossless codec there must be none.
func (l *finding) takeExtent(f *os.File, k kind) {
	if k.demuxer != "mov" || l.info.Codec != "aac" && l.info.Codec != "alac" {
		return
	}
	info, err := f.Stat()
	if err != nil {
		return
	}
	e, ok := mp4.SoundExtent(f, info.Size())
	if ok && e.Rate == l.info.Format.Rate && (l.info.BitDepth == 0 || e.Behind == 0) {
		l.extent, l.info.Frames = &e, e.Frames
	}
}
