package media

import (
	"bytes"
	"cmp"
	"context"
	"fmt"
	"io"
	"os"
	"strconv"

	"evenshelf/engine/tags/mp4"
)

// decoders names FFmpeg's decoder for a codec where it is not the codec's own name. Naming it makes
// readings repeatable on a machine whose FFmpeg has several.
var decoders = map[string]string{"mp3": "mp3float", "mp2": "mp2float", "mp1": "mp1float"}

func decoderOf(codec string) string { return cmp.Or(decoders[codec], codec) }

// decoderArgs choose the decoder of a sound track, counted from 1, by its codec; others than it would be misread. Of AC-3 and E-AC-3 the sound is what was coded: not as a player set to a
// narrow range would have it (dynrng, compr), nor turned down by the loudness of its dialogue that it claims, which
// FFmpeg does not do unless told to. What is measured is then what levelling works on, and the figures before and after
// are of one kind: our tracks carry neither. Claimed loudness is not to be trusted anyway (EBU Tech 3343, 6).
func decoderArgs(codec string, track int) []string {
	args := []string{fmt.Sprintf("-c:a:%d", max(1, track)-1), decoderOf(codec)}
	if codec == "ac3" || codec == "eac3" {
		args = append(args, "-drc_scale", "0")
	}
	return args
}

// onTime keeps the sound of a film beside its pictures: a gap in the time stamps becomes silence, and what lies twice in
// the same place is left out. Nothing is stretched, and no sample is changed. Stamps that are off by less are rounded
// ones, as in Matroska, which counts milliseconds; a packet that is missing is longer.
const onTime = "aresample=async=1:min_hard_comp=0.015"

// finding is what was learnt about a recording before it is decoded.
type finding struct {
	info    Info // but for Decoder
	gapless gapless
	extent  *mp4.Extent // where the sound of an MP4 is; nil: FFmpeg is to find out
	most    int64       // frames that there can be; 0: nobody knows
	wire    string      // FFmpeg's name of the encoding in which the samples come to us
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
func (t *Toolbox) look(ctx context.Context, f *os.File, k kind, track int) (finding, error) {
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
	if k.container == "ogg" {
		if err := checkChain(f, k); err != nil {
			return finding{}, err
		}
	}
	p, err := t.runProbe(ctx, f, k)
	if err != nil {
		return finding{}, err
	}
	info, s, err := p.info(k, track)
	if err != nil {
		return finding{}, err
	}
	l := finding{info: info, wire: s.wire()}
	if !info.isFilm() {
		l.takeExtent(f, k)
	} else if d, err := strconv.ParseFloat(p.Format.Duration, 64); err == nil && d < 1e9 {
		l.most = int64((2*d + 3600) * float64(info.Format.Rate))
	}
	if l.info.Codec == "opus" && l.info.Container == "ogg" && l.info.Frames > 0 {
		skip, err := opusPreSkip(f)
		if err != nil {
			return finding{}, err
		}
		l.info.Frames -= skip
	}
	return l, nil
}

func (t *Toolbox) openFFmpeg(ctx context.Context, f *os.File, path string, k kind, track int) (*ffReader, error) {
	l, err := t.look(ctx, f, k, track)
	if err != nil {
		return nil, err
	}
	l.info.Decoder = fmt.Sprintf("ffmpeg %s %s", t.Version(), decoderOf(l.info.Codec))

	// One thread of each kind: many recordings are read side by side. Without flush_packets every packet
	// would be a write of its own.
	args := []string{"-nostdin", "-v", "error", "-max_alloc", "268435456", "-filter_threads", "1", "-threads", "1", "-guess_layout_max", "0"}
	if k.container == "flac" { // it checks the frames' checksums only if told to
		args = append(args, "-err_detect", "+crccheck")
	}
	if k.container == "ogg" { // or it looks for the length, which is known, and takes the last link of a chain for damage
		args = append(args, "-seekable", "0")
	}
	args = append(args, decoderArgs(l.info.Codec, l.info.Track)...)
	if l.extent != nil {
		args = append(args, "-ignore_editlist", "1", "-flags2", "+skip_manual")
	}
	args = append(args, guarded(k)...)
	args = append(args, "-vn", "-sn", "-dn", "-map", fmt.Sprintf("0:a:%d", max(0, l.info.Track-1)), "-map_metadata", "-1", "-fflags", "+bitexact", "-flush_packets", "0")
	switch {
	case l.info.isFilm():
		args = append(args, "-af", onTime)
	case l.extent != nil && l.extent.Start > 0:
		args = append(args, "-af", fmt.Sprintf("atrim=start_sample=%d", l.extent.Start))
	}
	args = append(args, "-c:a", l.wire, "-f", "wav", "pipe:1")
	c, err := startChild(ctx, true, []*os.File{f}, t.ffmpeg, args...)
	if err != nil {
		return nil, err
	}
	r := &ffReader{f: f, path: path, info: l.info, child: c, longest: longest, stopped: stopped(ctx), most: l.most}
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
