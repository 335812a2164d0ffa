package mp4

import (
	"fmt"
	"io"
	"math/bits"
	"strings"
)

// Extent is where the sound of a file's first sound track lies among the frames that its packets decode to.
type Extent struct {
	Start  int64 // frames in front of it, of which most encoders need some to begin
	Frames int64 // its length
	Behind int64 // frames behind it, with which the last packets are filled
	Rate   int   // of both, Hz
}

// mostPadding is what an encoder may have added behind the sound to fill its last packets, in frames. An edit list that
// leaves out more has been made by a person.
const mostPadding = 3 * 1024

// SoundExtent finds out where the sound lies, to the frame: by the edit list (14496-12, 8.6.6), else by the note in
// which players of AAC keep it ("…SMPB"). ok is false where neither is simple: several edits, a pause in front,
// fragments. Where an edit list counts in coarser steps than frames, and the last packet says how long it really is,
// that is believed.
func SoundExtent(r io.ReaderAt, size int64) (e Extent, ok bool) {
	e, media, ok := extentOf(r, size)
	e.Behind = media - e.Start - e.Frames
	return e, ok && e.Behind >= 0 && e.Behind <= mostPadding
}

// extentOf returns the extent and how many frames there are in all.
func extentOf(r io.ReaderAt, size int64) (e Extent, media int64, ok bool) {
	f, err := open(r, size)
	if err != nil || f.moov.child("mvex") != nil {
		return e, 0, false
	}
	trak := f.track("soun")
	mdhd, movie := durationOf(trak.child("mdia", "mdhd")), durationOf(f.moov.child("mvhd"))
	media, ok = sumOf(trak.child("mdia", "minf", "stbl", "stts"))
	if !ok || mdhd.scale == 0 || movie.scale == 0 || media <= 0 {
		return e, media, false
	}
	e = Extent{Frames: media, Rate: int(mdhd.scale)}
	edits, ok := editsOf(trak)
	switch {
	case !ok || len(edits) > 1:
		return e, media, false
	case len(edits) == 1:
		x := edits[0]
		if e.Start = x.start; x.start < 0 || x.rate != 1<<16 || x.start >= media {
			return e, media, false
		}
		e.Frames = media - e.Start
		stated, tick := scaled(x.length, mdhd.scale, movie.scale), int64(mdhd.scale/movie.scale)
		if off := stated - e.Frames; x.length > 0 && (off < -2*tick || off > 2*tick || tick <= 1 && off < 0) {
			e.Frames = min(e.Frames, stated)
		}
	}
	if e.Start == 0 && e.Frames == media {
		if note, ok := noted(f.moov); ok && note.Start+note.Frames <= media && media-note.Start-note.Frames <= mostPadding {
			e.Start, e.Frames = note.Start, note.Frames
		}
	}
	return e, media, true
}

// noted reads the note of where the sound begins and how long it is: numbers in hexadecimal digits, of which the second
// is the frames in front, the third those behind, the fourth the length.
func noted(moov *box) (e Extent, ok bool) {
	meta := moov.child("udta", "meta")
	name := namesOf(meta)
	for _, item := range meta.child("ilst").list() {
		if item.kind != "----" || !strings.HasSuffix(strings.ToUpper(name(item)), "SMPB") {
			continue
		}
		for _, p := range parts(item.body) {
			var zero, behind int64
			if p.kind == "data" && len(p.body) > 8 {
				n, _ := fmt.Sscanf(string(p.body[8:min(len(p.body), 200)]), "%x %x %x %x", &zero, &e.Start, &behind, &e.Frames)
				return e, n == 4 && e.Start >= 0 && e.Frames > 0 && e.Start < 1<<20 && e.Frames < 1<<50
			}
		}
	}
	return e, false
}

// sumOf returns the duration of all samples by their table (stts).
func sumOf(stts *box) (n int64, ok bool) {
	if stts == nil || len(stts.body) < 8 {
		return 0, false
	}
	count, b := int64(be32(stts.body[4:])), stts.body[8:]
	if count > int64(len(b)/8) {
		return 0, false
	}
	for ; count > 0; count, b = count-1, b[8:] {
		if n += int64(be32(b)) * int64(be32(b[4:])&0x7FFFFFFF); n < 0 || n > 1<<50 {
			return 0, false
		}
	}
	return n, true
}

// edit is an entry of an edit list.
type edit struct {
	length uint64 // in the movie's time scale
	start  int64  // in the track's; −1 is a pause
	rate   uint32 // 16.16
}

// editsOf returns a track's edit list; ok is false if it is damaged.
func editsOf(trak *box) (list []edit, ok bool) {
	x := trak.child("edts", "elst")
	if x == nil {
		return nil, true
	}
	if len(x.body) < 8 {
		return nil, false
	}
	size, b := 12, x.body[8:]
	if x.body[0] == 1 {
		size = 20
	}
	if n := int64(be32(x.body[4:])); n > int64(len(b)/size) || n > maxBoxes {
		return nil, false
	}
	for range be32(x.body[4:]) {
		e := edit{rate: be32(b[size-4:])}
		if size == 20 {
			e.length, e.start = be64(b), int64(be64(b[8:]))
		} else {
			e.length, e.start = uint64(be32(b)), int64(int32(be32(b[4:])))
		}
		list, b = append(list, e), b[size:]
	}
	return list, true
}

// elst is an edit list as a box, in 64 bits where it needs them.
func elst(list []edit) *box {
	wide := false
	for _, e := range list {
		wide = wide || e.length > 1<<32-1 || e.start != int64(int32(e.start))
	}
	b := put32(full(0), uint32(len(list)))
	if wide {
		b[0] = 1
	}
	for _, e := range list {
		if wide {
			b = put32(append(put32(put32(b, uint32(e.length>>32)), uint32(e.length)), byte(e.start>>56), byte(e.start>>48), byte(e.start>>40), byte(e.start>>32)), uint32(e.start))
		} else {
			b = put32(put32(b, uint32(e.length)), uint32(e.start))
		}
		b = put32(b, e.rate)
	}
	return &box{kind: "elst", body: b}
}

// scaled converts a duration from a time scale to another, rounded; what does not fit is as much as there is.
func scaled(n uint64, to, from uint32) int64 {
	hi, lo := bits.Mul64(n, uint64(to))
	lo, carry := bits.Add64(lo, uint64(from/2), 0)
	if hi += carry; hi >= uint64(from) {
		return 1<<63 - 1
	}
	q, _ := bits.Div64(hi, lo, uint64(from))
	return int64(min(q, 1<<63-1))
}
