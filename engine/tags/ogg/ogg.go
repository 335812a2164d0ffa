// Package ogg knows the pages of an Ogg file (RFC 3533) and the comment packets of Vorbis (Vorbis I, 4.2 and A.2) and
// Opus (RFC 7845, 5) in it. Packets of sound pass through untouched; what changes is the comments, the pages they are on,
// and the numbers of the pages that follow.
package ogg

import (
	"bufio"
	"bytes"
	"encoding/binary"
	"fmt"
	"io"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/vorbis"
)

// codec is what a logical stream of sound says it is, in its first packet.
type codec struct {
	name    string // as FFmpeg calls it
	head    string // what its first packet begins with
	comment string // what its second packet begins with; "" if it is not ours to read
	headers int    // packets in front of the sound
}

// codecs are those of sound. What Ogg carries beside, films and texts, is none.
var codecs = []codec{
	{"vorbis", "\x01vorbis", "\x03vorbis", 3},
	{"opus", "OpusHead", "OpusTags", 2},
	{"flac", "\x7FFLAC\x01", "", 1}, // and as many as it says itself
	{"speex", "Speex   ", "", 1},
}

// In the first packet of a FLAC, the number of further headers and the FLAC's own beginning (RFC 9639, 10.1).
const (
	flacHeaders = 7
	flacMark    = 9
)

func codecOf(p page) (codec, bool) {
	for _, c := range codecs {
		if bytes.HasPrefix(p.body(), []byte(c.head)) {
			return c, true
		}
	}
	return codec{}, false
}

// maxHeaders is more than pictures and setup of any recording take; a hostile file can take no more memory.
const maxHeaders = 64 << 20

// MaxComments is how many bytes of comments leave room for the other headers.
const MaxComments = maxHeaders - 1<<20

// headers gathers the packets in front of the sound. The first is alone on its page, and kept apart.
type headers struct {
	codec   codec
	first   []byte
	packets [][]byte
	open    bool // the last packet goes on
	bytes   int
}

// begin begins with the first page of a stream.
func begin(c codec, p page) *headers {
	h := &headers{codec: c, first: bytes.Clone(p.body())}
	if c.name == "flac" && len(h.first) >= flacMark {
		h.codec.headers += int(binary.BigEndian.Uint16(h.first[flacHeaders:]))
	}
	return h
}

func (h *headers) complete() bool { return len(h.packets) == h.codec.headers-1 && !h.open }

// add takes the packets on a page. The last header packet has to end its page.
func (h *headers) add(p page) error {
	if p.has(continued) != h.open {
		return fmt.Errorf("%w: a page of its headers is missing", ErrDamaged)
	}
	body := p.body()
	if h.bytes += len(body); h.bytes > maxHeaders {
		return fmt.Errorf("%w: its headers are larger than any recording's", ErrDamaged)
	}
	for _, n := range p.lacing() {
		if !h.open {
			if h.complete() {
				return fmt.Errorf("%w: its sound begins on a page of the headers", ErrDamaged)
			}
			h.packets = append(h.packets, nil)
		}
		at := len(h.packets) - 1
		h.packets[at] = append(h.packets[at], body[:n]...)
		body = body[n:]
		h.open = n == 255
	}
	return nil
}

// comments reads the comment packet.
func (h *headers) comments() (vorbis.Comment, error) {
	body, ok := bytes.CutPrefix(h.packets[0], []byte(h.codec.comment))
	if !ok {
		return vorbis.Comment{}, fmt.Errorf("%w: its comments are missing", ErrDamaged)
	}
	c, err := vorbis.Parse(body)
	if err != nil {
		return c, fmt.Errorf("%w: %w", ErrDamaged, err)
	}
	return c, nil
}

// readHeaders reads the headers of the first stream of sound in a file. With an error after its first page comes what
// was read.
func readHeaders(src io.Reader) (h *headers, err error) {
	var serial uint32
	for in := newPages(src); h == nil || !h.complete(); {
		p, err := in.next()
		switch {
		case h == nil && (err == io.EOF || err == nil && !p.has(first)): // behind all beginnings
			return nil, fmt.Errorf("%w: there is no sound in it", ErrOther)
		case err == io.EOF:
			return h, fmt.Errorf("%w: its headers are cut off", ErrDamaged)
		case err != nil:
			return h, err
		case h == nil:
			if c, ok := codecOf(p); ok {
				h, serial = begin(c, p), p.serial()
			}
		case p.serial() == serial:
			if err := h.add(p); err != nil {
				return h, err
			}
		}
	}
	return h, nil
}

// Comments reads the comments of the first stream of sound in a file, if that is Vorbis or Opus. codec is FFmpeg's name of
// it, also with an error if that much is known.
func Comments(src io.Reader) (codec string, c vorbis.Comment, err error) {
	h, err := readHeaders(src)
	switch {
	case h == nil:
		return "", c, err
	case err == nil && h.codec.comment == "":
		err = fmt.Errorf("%w: %s", ErrOther, h.codec.name)
	case err == nil:
		c, err = h.comments()
	}
	return h.codec.name, c, err
}

// FLACHead returns the metadata of a FLAC in Ogg as it would stand in front of a FLAC by itself: its mark and its blocks
// (RFC 9639, 10.1). It is an error if there is none.
func FLACHead(src io.Reader) ([]byte, error) {
	h, err := readHeaders(src)
	if err != nil {
		return nil, err
	}
	if h.codec.name != "flac" || len(h.packets) == 0 { // none: their number is not told
		return nil, fmt.Errorf("%w: its FLAC headers are not found", ErrDamaged)
	}
	return append(h.first[flacMark:], bytes.Join(h.packets, nil)...), nil
}

// Edit copies an Ogg file with its comments edited, link by link if it is a chained one. Only pages of comments, and
// of what is between them and the sound, are made anew; the others are at most renumbered.
func Edit(dst io.Writer, src io.Reader, edit func(codec string, c *vorbis.Comment)) error {
	w := bufio.NewWriterSize(dst, 64<<10)
	put := func(p page) error { _, err := w.Write(p); return err }
	var (
		in     = newPages(src)
		h      *headers // of the link that is being read, until they are complete
		begun  bool
		serial uint32
		shift  uint32 // added to the numbers of a link's pages
		number uint32 // of the page behind the first
	)
	for {
		p, err := in.next()
		switch {
		case err == io.EOF && h == nil && begun:
			return w.Flush()
		case err == io.EOF:
			return fmt.Errorf("%w: its headers are cut off", ErrDamaged)
		case err != nil:
			return err
		case p.has(first) && h == nil: // a link begins
			c, ok := codecOf(p)
			if !ok || c.comment == "" {
				return ErrOther
			}
			h, begun, serial, number, shift = begin(c, p), true, p.serial(), p.sequence()+1, 0
			err = put(p)
		case p.has(first) || p.serial() != serial: // streams side by side
			return ErrOther
		case h == nil:
			if shift != 0 {
				p.renumber(p.sequence() + shift)
			}
			err = put(p)
		default:
			if err := h.add(p); err != nil {
				return err
			}
			if !h.complete() {
				continue
			}
			c, err := h.comments()
			if err != nil {
				return err
			}
			edit(h.codec.name, &c)
			h.packets[0] = append([]byte(h.codec.comment), c.Bytes()...)
			next, err := paginate(h.packets, serial, number, p.has(lastOf), put)
			if err != nil {
				return err
			}
			shift, h = next-(p.sequence()+1), nil
		}
		if err != nil {
			return err
		}
	}
}

// Retag copies an Ogg file with other gain tags: Opus has its own (RFC 7845, 5.2.1) and is left without any others.
// Every link of a chained file gets the same. Errors wrap ErrOther or ErrDamaged, or are of reading and writing.
func Retag(dst io.Writer, src *io.SectionReader, g tags.Gains) error {
	return Edit(dst, io.NewSectionReader(src, 0, src.Size()), func(codec string, c *vorbis.Comment) {
		pairs := g.ReplayGain()
		if codec == "opus" {
			pairs = g.R128()
		}
		vorbis.Edit{Drop: tags.IsGain, Add: pairs}.Apply(c)
	})
}
