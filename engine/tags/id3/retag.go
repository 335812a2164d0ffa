package id3

import (
	"bytes"
	"errors"
	"io"

	"evenshelf/engine/tags"
)

// Retag writes the MPEG audio or ADTS in src to dst with the gain tags g instead of those it had: as TXXX frames of its first
// ID3v2 tag, and among the items of an APEv2 tag that had any. Everything else stays, and the sound byte for byte, but
// for what an ID3v2 tag says about places in the file, which move.
//
// A file without an ID3v2 tag gets one of version 2.3: it holds these tags as well as 2.4 does, and old players and
// systems read no other.
func Retag(dst io.Writer, src *io.SectionReader, g tags.Gains) error {
	start, err := headEnd(src)
	if err != nil {
		return err
	}
	end, err := TailStart(src, start, src.Size())
	if err != nil {
		return err
	}
	if max(start, src.Size()-end) > MaxLength {
		return errors.New("its tags are larger than any recording's")
	}
	head, err := tags.ReadAt(src, 0, int(start))
	if err != nil {
		return err
	}
	tail, err := tags.ReadAt(src, end, int(src.Size()-end))
	if err != nil {
		return err
	}
	front, back := regained(head, tail, g.ReplayGain())
	_, err = io.Copy(dst, io.MultiReader(bytes.NewReader(front), io.NewSectionReader(src, start, end-start), bytes.NewReader(back)))
	return err
}

// headEnd returns where the tags end that a file begins with.
func headEnd(src *io.SectionReader) (int64, error) {
	end := int64(0)
	for range maxTags {
		b, err := tags.ReadAt(src, end, apeLen)
		if err != nil {
			return 0, err
		}
		n := HeadLength(b)
		if n == 0 || end+n > src.Size() {
			break
		}
		end += n
	}
	return end, nil
}

// regained returns the tags at both ends of a file with other gains, which the first ID3v2 tag tells that is understood.
func regained(head, tail []byte, gains [][2]string) (front, back []byte) {
	told := false
	regain := func(b []byte) []byte {
		add := gains
		if isID3(b) {
			if _, ok := parse(b); told || !ok {
				add = nil
			} else {
				told = true
			}
		}
		return edited(b, retagged, add)
	}
	for _, b := range headTags(head) {
		front = append(front, regain(b)...)
	}
	if !told {
		fresh := tag{head: [headLen]byte{'I', 'D', '3', 3}}
		front, told = append(fresh.edited(nil, retagged, gains), front...), true
	}
	for _, p := range tailPieces(tail) {
		if p.editable {
			p.bytes = regain(p.bytes)
		}
		back = append(back, p.bytes...)
	}
	return front, back
}
