package id3

import (
	"bytes"
	"encoding/binary"
	"strconv"
	"strings"

	"evenshelf/engine/tags"
)

// apeNames are the names of a sheet for APEv2's keys, in capitals, that are others (from memory).
var apeNames = map[string]string{
	"YEAR": "DATE", "TRACK": "TRACKNUMBER", "DISC": "DISCNUMBER", "ALBUM ARTIST": "ALBUMARTIST", "PUBLISHER": "LABEL",
	"MIXARTIST": "REMIXER", "RECORD DATE": "DATE",
}

// apeSheet returns what an APEv2 tag says.
func apeSheet(b []byte) (s tags.Sheet) {
	t, ok := parseAPE(b)
	if !ok {
		return s
	}
	for _, item := range t.items[:min(len(t.items), maxFrames)] {
		const fixed, kinds, words = 8, 3 << 1, 0
		value := item.raw[fixed+len(item.key)+1:]
		name := strings.ToUpper(item.key)
		if now := apeNames[name]; now != "" {
			name = now
		}
		if kind, cover := apeCovers[name]; cover {
			if _, data, named := bytes.Cut(value, []byte{0}); named && len(data) > 0 && len(s.Pictures) < tags.Most {
				s.Pictures = append(s.Pictures, tags.Picture{Kind: kind, MIME: tags.MIME(data), Data: data})
			}
		}
		if binary.LittleEndian.Uint32(item.raw[4:])&kinds != words || tags.Stale(name) {
			continue
		}
		addAll(&s, name, list(3, value))
	}
	s.Settle()
	return s
}

// apeCovers are the keys of pictures, and what kinds they are.
var apeCovers = map[string]int{"COVER ART (FRONT)": tags.FrontCover, "COVER ART (BACK)": 4}

// v1Sheet returns what an ID3v1 tag says, with the track number of 1.1.
func v1Sheet(b []byte) (s tags.Sheet) {
	const length, comment, number, kind = 128, 97, 126, 127
	if len(b) != length || string(b[:3]) != "TAG" {
		return s
	}
	end := kind
	if b[number-1] == 0 && b[number] != 0 {
		end = number - 1
		s.Add("TRACKNUMBER", strconv.Itoa(int(b[number])))
	}
	s.Add("TITLE", tags.Guess(b[3:33]))
	s.Add("ARTIST", tags.Guess(b[33:63]))
	s.Add("ALBUM", tags.Guess(b[63:93]))
	s.Add("DATE", tags.Guess(b[93:comment]))
	s.Add("COMMENT", tags.Guess(b[comment:end]))
	if n := int(b[kind]); n < len(tags.Genres) {
		s.Add("GENRE", tags.Genres[n])
	}
	return s
}
