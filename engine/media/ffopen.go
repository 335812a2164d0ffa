package media

import (
	"bytes"
	"cmp"
	"context"
	"fmt"
	"io"
	"os"
)

// decoders names FFmpeg's decoder for a codec where it is not the codec's own name. Naming it makes
// readings repeatable on a machine whose FFmpeg has several.
var decoders = map[string]string{"mp3": "mp3float", "mp2": "mp2float", "mp1": "mp1float"}

// finding is what was learnt about a recording before it is decoded.
type finding struct {
	info    Info // but for Decoder
	gapless gapless
	wire    string // FFmpeg's name of the encoding in which the samples come to us
}

// Samples come through the pipe as the decoder makes them: FFmpeg has nothing to convert, and those of 16
// bits are half the bytes of float.
const (
	wire16    = "pcm_s16le"
	wire24    = "pcm_s24le" // nothing of the decoder's 32 bits is lost if no more were in the file
	wire32    = "pcm_s32le"
	wireFloat = "pcm_f32le"
)

// look finds out what FFmpeg has to be told. FLAC and MPEG audio say it in their first bytes; for the
// rest ffprobe is asked, which takes as long as starting FFmpeg does.
func (t *Toolbox) look(ctx context.Context, f *os.File, k kind) (finding, error) {
	switch k.container {
	case "flac":
		m, err := readFLACMeta(f, k.start)
		if err != nil {
			return finding{}, err
		}
		return m.finding()
	case "mp3":
		return lookMPEG(f, k.start)
	}
	p, err := t.runProbe(ctx, f, k)
	if err != nil {
		return finding{}, err
	}
	l := finding{}
	if l.info, err = p.info(k); err != nil {
		return finding{}, err
	}
	l.wire = p.sound().wire()
	if l.info.Codec == "opus" && l.info.Container == "ogg" && l.info.Frames > 0 {
		skip, err := opusPreSkip(f)
		if err != nil {
			return finding{}, err
		}
		l.info.Frames -= skip
	}
	return l, nil
}

func (t *Toolbox) openFFmpeg(ctx context.Context, f *os.File, path string, k kind) (*ffReader, error) {
	l, err := t.look(ctx, f, k)
	if err != nil {
		return nil, err
	}
	decoder := cmp.Or(decoders[l.info.Codec], l.info.Codec)
	l.info.Decoder = fmt.Sprintf("ffmpeg %s %s", t.Version(), decoder)

	// One thread of each kind: many recordings are read side by side. Without flush_packets every packet
	// would be a write of its own.
	args := []string{"-nostdin", "-v", "error", "-max_alloc", "268435456", "-filter_threads", "1", "-threads", "1", "-guess_layout_max", "0"}
	if k.container == "flac" { // it checks the frames' checksums only if told to
		args = append(args, "-err_detect", "+crccheck")
	}
	args = append(append(args, "-c:a", decoder), guarded(k)...)
	args = append(args, "-vn", "-sn", "-dn", "-map", "0:a:0", "-map_metadata", "-1", "-fflags", "+bitexact", "-flush_packets", "0")
	args = append(args, "-c:a", l.wire, "-f", "wav", "pipe:1")
	c, err := startChild(ctx, true, []*os.File{f}, t.ffmpeg, args...)
	if err != nil {
		return nil, err
	}
	r := &ffReader{f: f, path: path, info: l.info, child: c, longest: longest, stopped: stopped(ctx)}
	if err := r.begin(l.gapless); err != nil {
		c.kill()
		return nil, err
	}
	return r, nil
}

// opusPreSkip returns how many frames an Opus decoder drops at the start (RFC 7845, 5.1). They are in
// the count that Ogg keeps.
func opusPreSkip(r io.ReaderAt) (int64, error) {
	head, err := readAt(r, 0, sniffBytes)
	if at := bytes.Index(head, []byte("OpusHead")); at >= 0 && at+12 <= len(head) {
		return int64(le16(head[at+10:])), err
	}
	return 0, err
}
