package mp4

import (
	"encoding/binary"
	"time"

	"evenshelf/engine/tags"
)

// titleScale is the units a second of a track of titles: 10 µs, so that milliseconds are exact and a chapter may have
// eleven hours.
const titleScale = 100_000

// titles makes a track of titles for the chapters of a sound track, and the samples that belong into it, which lie at an
// offset of the file (QuickTime File Format, "Text Media" and "Chapter Lists"; from memory). Its first chapter may begin
// late, after which each lasts until the next. The chapters have to be in order, and there must be some.
func titles(chapters []tags.Chapter, id uint32, movie duration, at int64) (trak *box, samples []byte) {
	scale := uint64(max(1, movie.scale))
	units := func(d time.Duration) int64 { return int64((d + 5*time.Microsecond) / (time.Second / titleScale)) }
	first := units(chapters[0].Start)
	end := max(scaled(movie.length, titleScale, uint32(scale)), units(chapters[len(chapters)-1].Start)+1)
	stts, stsz := put32(full(0), uint32(len(chapters))), put32(put32(full(0), 0), uint32(len(chapters)))
	for i, ch := range chapters {
		next := end
		if i+1 < len(chapters) {
			next = units(chapters[i+1].Start)
		}
		title := cutText(ch.Title, 1<<16-1)
		samples = append(binary.BigEndian.AppendUint16(samples, uint16(len(title))), title...)
		stts = put32(put32(stts, 1), uint32(min(next-units(ch.Start), 1<<32-1)))
		stsz = put32(stsz, uint32(2+len(title)))
	}
	stsc := put32(put32(put32(put32(full(0), 1), 1), uint32(len(chapters))), 1)
	co64 := binary.BigEndian.AppendUint64(put32(full(0), 1), uint64(at))

	gap := uint64(scaled(uint64(first), uint32(scale), titleScale))
	long := uint64(scaled(uint64(end-first), uint32(scale), titleScale))
	edits := []edit{{long, 0, 1 << 16}}
	if gap > 0 {
		edits = append([]edit{{gap, -1, 1 << 16}}, edits...)
	}
	trak = &box{kind: "trak", kids: []*box{
		{kind: "tkhd", body: trackHead(id, gap+long)},
		{kind: "edts", kids: []*box{elst(edits)}},
		{kind: "mdia", kids: []*box{
			{kind: "mdhd", body: mediaHead(titleScale, uint64(end-first))},
			{kind: "hdlr", body: append([]byte("\x00\x00\x00\x00\x00\x00\x00\x00text"), make([]byte, 13)...)},
			{kind: "minf", kids: []*box{
				{kind: "gmhd", body: boxRow("gmin", "\x00\x00\x00\x00\x00\x40\x80\x00\x80\x00\x80\x00\x00\x00\x00\x00", "text", matrix)},
				{kind: "dinf", kids: []*box{{kind: "dref", body: put32(full(0), 1), kids: []*box{{kind: "url ", body: full(1)}}}}}, // in this file
				{kind: "stbl", kids: []*box{
					{kind: "stsd", body: append(put32(full(0), 1), boxRow("text", "\x00\x00\x00\x00\x00\x00\x00\x01"+style)...)},
					{kind: "stts", body: stts}, {kind: "stsc", body: stsc}, {kind: "stsz", body: stsz}, {kind: "co64", body: co64},
				}},
			}},
		}},
	}}
	return trak, samples
}

const (
	// matrix turns and moves nothing (14496-12, 6.2.2).
	matrix = "\x00\x01\x00\x00" + "\x00\x00\x00\x00" + "\x00\x00\x00\x00" + "\x00\x00\x00\x00" + "\x00\x01\x00\x00" + "\x00\x00\x00\x00" + "\x00\x00\x00\x00" + "\x00\x00\x00\x00" + "\x40\x00\x00\x00"
	// style is the look of a text: flags (1: it is not shown), justification, background, box, reserved, font, face, reserved,
	// colour, and the font's name. There is nothing to see.
	style = "\x00\x00\x00\x01" + "\x00\x00\x00\x00" + "\x00\x00\x00\x00\x00\x00" + "\x00\x00\x00\x00\x00\x00\x00\x00" + "\x00\x00\x00\x00\x00\x00\x00\x00" +
		"\x00\x00" + "\x00\x00" + "\x00\x00\x00" + "\x00\x00\x00\x00\x00\x00" + "\x00"
)

// boxRow is boxes in a row, each of a name and a content.
func boxRow(pairs ...string) (b []byte) {
	for i := 0; i < len(pairs); i += 2 {
		b = append(append(put32(b, uint32(boxHead+len(pairs[i+1]))), pairs[i]...), pairs[i+1]...)
	}
	return b
}

// trackHead is a track header of version 1 (14496-12, 8.3.2). The track is in the movie, but not played by itself.
func trackHead(id uint32, length uint64) []byte {
	b := append(full(1<<24|2), make([]byte, 16)...) // made, changed
	b = put32(put32(b, id), 0)
	b = binary.BigEndian.AppendUint64(b, length)
	b = append(b, make([]byte, 16)...) // layer, group, volume
	return append(append(b, matrix...), make([]byte, 8)...)
}

// mediaHead is a media header of version 1, of no language (14496-12, 8.4.2).
func mediaHead(scale uint32, length uint64) []byte {
	b := append(full(1<<24), make([]byte, 16)...)
	b = binary.BigEndian.AppendUint64(put32(b, scale), length)
	return append(b, 0x55, 0xC4, 0, 0) // und
}
