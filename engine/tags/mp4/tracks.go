package mp4

import (
	"encoding/binary"
	"errors"
	"io"
	"slices"
)

const (
	maxTracks = 64 << 20 // bytes of all chapter titles and pictures
	maxBeside = 1000     // tracks one refers to, boxes beside the movie box
)

// track is one that is carried as it is beside the sound: chapter titles, their pictures and links, lyrics.
type track struct {
	trak   *box
	chunks []span // of its samples, in the source
	table  table  // of where they come to lie
}

// lengthOf returns how many bytes the samples of tracks take, as a box.
func lengthOf(tracks []track) int64 {
	n := int64(0)
	for _, t := range tracks {
		for _, c := range t.chunks {
			n += c.len
		}
	}
	if n > 0 {
		n += boxHead
	}
	return n
}

// tracks enters the text tracks of the source, and those that are chapters of the sound, into the movie of a copy.
// One that is damaged, or too large to be what it says, is left out.
func (c *Carried) tracks(moov, sound *box) (list []track) {
	var chapters []uint32
	for _, trak := range c.from.moov.all("trak") {
		chapters = append(chapters, references(trak.child("tref", "chap"))...)
	}
	id, refs, left := trackID(sound), []byte(nil), int64(maxTracks)
	for _, trak := range c.from.moov.all("trak") {
		isChapter := slices.Contains(chapters, trackID(trak))
		if trak == c.sound || !isChapter && !slices.Contains([]string{"text", "sbtl", "subt"}, handlerOf(trak.child("mdia"))) {
			continue
		}
		t, err := c.track(trak, left)
		if err != nil || rescale(trak, moov, c.from.moov) != nil {
			continue
		}
		left -= lengthOf([]track{t})
		id++
		setTrackID(trak, id)
		moov.kids = slices.Insert(moov.kids, slices.Index(moov.kids, sound)+1+len(list), trak)
		list = append(list, t)
		if isChapter {
			refs = put32(refs, id)
		}
	}
	if h, ok := headerOf(moov.child("mvhd")); ok {
		binary.BigEndian.PutUint32(h.x.body[len(h.x.body)-4:], id+1) // the next free one
	}
	if len(refs) > 0 {
		sound.replace("tref", &box{kind: "tref", kids: []*box{{kind: "chap", body: refs}}})
	}
	return list
}

// references returns the tracks a reference names.
func references(x *box) (ids []uint32) {
	if x != nil {
		for b := x.body; len(b) >= 4 && len(ids) < maxBeside; b = b[4:] {
			ids = append(ids, be32(b))
		}
	}
	return ids
}

func trackID(trak *box) uint32 {
	if h, ok := headerOf(trak.child("tkhd")); ok {
		return be32(h.x.body[4+2*h.wide:])
	}
	return 0
}

func setTrackID(trak *box, id uint32) {
	if h, ok := headerOf(trak.child("tkhd")); ok {
		binary.BigEndian.PutUint32(h.x.body[4+2*h.wide:], id)
	}
}

// rescale brings the durations that a track states in its movie's time scale into that of another movie.
func rescale(trak, to, from *box) error {
	h, ok := headerOf(trak.child("tkhd"))
	edits, okToo := editsOf(trak)
	new, old := durationOf(to.child("mvhd")).scale, durationOf(from.child("mvhd")).scale
	if !ok || !okToo || new == 0 || old == 0 {
		return damage("the track's header")
	}
	at := 4 + 2*h.wide + 8
	length := uint64(scaled(h.get(at), new, old))
	if h.wide == 4 && (length >= 1<<32 || h.get(at) == 1<<32-1) {
		length = 1<<32 - 1 // not known
	}
	h.put(at, length)
	for i := range edits {
		edits[i].length = uint64(scaled(edits[i].length, new, old))
	}
	if x := trak.child("edts"); x != nil {
		x.replace("elst", elst(edits))
	}
	return nil
}

// track prepares a track of the source to be carried; its samples may have no more than so many bytes.
func (c *Carried) track(trak *box, most int64) (t track, err error) {
	if err := movable(trak); err != nil {
		return t, err
	}
	stbl := trak.child("mdia", "minf", "stbl")
	if t.chunks, err = c.from.chunks(stbl, most); err != nil {
		return t, err
	}
	body := put32(full(0), uint32(len(t.chunks)))
	x := &box{kind: "co64", body: append(body, make([]byte, 8*len(t.chunks))...)}
	stbl.drop("co64")
	stbl.replace("stco", x)
	trak.drop("tref")
	t.trak = trak
	t.table, _, err = tableOf(x)
	return t, err
}

// chunks returns where the samples of a track are, by its tables (14496-12, 8.7).
func (f *file) chunks(stbl *box, most int64) (list []span, err error) {
	offsets := stbl.child("stco")
	if offsets == nil {
		offsets = stbl.child("co64")
	}
	stsc, stsz := stbl.child("stsc"), stbl.child("stsz")
	if offsets == nil || stsc == nil || stsz == nil || len(stsc.body) < 8 || len(stsz.body) < 12 {
		return nil, damage("a track has no tables")
	}
	t, _, err := tableOf(offsets)
	if err == nil && t.n > maxBoxes {
		err = damage("a track has more pieces than chapters")
	}
	if err != nil {
		return nil, err
	}
	runs, sizes := stsc.body[8:], stsz.body[12:]
	fixed, samples := int64(be32(stsz.body[4:])), int64(be32(stsz.body[8:]))
	if fixed == 0 && samples > int64(len(sizes)/4) {
		return nil, damage("a table of sizes breaks off")
	}
	per, next := int64(0), int64(0)
	for i := range t.n {
		for len(runs) >= 12 && be32(runs) <= uint32(i)+1 {
			per, runs = int64(be32(runs[4:])), runs[12:]
		}
		s, n := span{at: int64(t.get(i))}, max(0, min(per, samples-next))
		if fixed > 0 {
			s.len = fixed * min(n, maxTracks)
		}
		for k := int64(0); k < n && fixed == 0; k++ {
			s.len += int64(be32(sizes[4*(next+k):]))
		}
		next += n
		if most -= s.len; most < 0 || s.at < 0 || s.at > f.size-s.len {
			return nil, errors.New("a track of chapters is too large or points outside the file")
		}
		list = append(list, s)
	}
	return list, nil
}

// writeTracks writes the samples of tracks as a box at an offset, enters into their tables where they lie, and returns
// where the box ends.
func (c *Carried) writeTracks(f Target, at int64, tracks []track) (end int64, err error) {
	n := lengthOf(tracks)
	if n == 0 {
		return at, nil
	}
	w := io.NewOffsetWriter(f, at)
	if _, err := w.Write(append(put32(nil, uint32(n)), "mdat"...)); err != nil {
		return at, err
	}
	at += boxHead
	for _, t := range tracks {
		for i, s := range t.chunks {
			if _, err := io.CopyN(w, io.NewSectionReader(c.from.r, s.at, s.len), s.len); err != nil {
				return at, err
			}
			t.table.set(i, uint64(at))
			at += s.len
		}
	}
	return at, nil
}
