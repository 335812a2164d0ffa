// Package flac knows the metadata blocks in front of a FLAC's sound (RFC 9639, 8), as bytes: what a block means matters
// only where a new level or a new encoding makes it wrong.
package flac

import (
	"bufio"
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"slices"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/vorbis"
)

// Types of blocks that are treated specially; all others are only carried.
const (
	StreamInfo    = 0
	Padding       = 1
	SeekTable     = 3
	VorbisComment = 4
	Picture       = 6
	Forbidden     = 127 // would look like a frame
)

const (
	// First is where the block after STREAMINFO begins: behind the mark and a header with 34 bytes.
	First   = 4 + 4 + infoBytes
	MaxBody = 1<<24 - 1 // bytes of one block: its length has 24 bits

	mark      = "fLaC"
	infoBytes = 34
	maxBlocks = 10_000 // more have no use and would take long to read
)

// Block is a metadata block without its header.
type Block struct {
	Type byte
	Body *io.SectionReader
}

// Made is a block of these bytes.
func Made(kind byte, body []byte) Block {
	return Block{kind, io.NewSectionReader(bytes.NewReader(body), 0, int64(len(body)))}
}

// bytes reads the body. It takes no more memory than the file has bytes, whatever a length says.
func (b Block) bytes() ([]byte, error) {
	body, err := io.ReadAll(io.NewSectionReader(b.Body, 0, b.Body.Size()))
	if err == nil && int64(len(body)) < b.Body.Size() {
		err = io.ErrUnexpectedEOF
	}
	return body, err
}

// Blocks lists the metadata blocks of the FLAC that src begins with, and says where its first frame is. With an error
// come the blocks that were found until then; STREAMINFO is the first, or there are none.
func Blocks(src io.ReaderAt) (list []Block, sound int64, err error) {
	var head [4]byte
	if _, err := src.ReadAt(head[:], 0); err != nil || string(head[:]) != mark {
		return nil, 0, errors.New("it does not begin with fLaC")
	}
	at := int64(len(mark))
	for last := false; !last; {
		if _, err := src.ReadAt(head[:], at); err != nil {
			return list, at, cut(err)
		}
		at += 4
		b := Block{head[0] & 0x7F, io.NewSectionReader(src, at, int64(binary.BigEndian.Uint32(head[:])&MaxBody))}
		switch {
		case len(list) == 0 && (b.Type != StreamInfo || b.Body.Size() != infoBytes):
			return nil, at, errors.New("it does not begin with STREAMINFO")
		case len(list) == maxBlocks:
			return list, at, fmt.Errorf("it has more than %d metadata blocks", maxBlocks)
		}
		list = append(list, b)
		at += b.Body.Size()
		last = head[0]&0x80 != 0
	}
	return list, at, nil
}

// cut turns the end of a file into the word for an early one.
func cut(err error) error {
	if err == io.EOF {
		return io.ErrUnexpectedEOF
	}
	return err
}

// Size is how many bytes blocks take with their headers.
func Size(list []Block) (n int64) {
	for _, b := range list {
		n += 4 + b.Body.Size()
	}
	return n
}

// Write writes blocks with their headers, the last of them marked as that if it ends the metadata.
func Write(dst io.Writer, list []Block, last bool) error {
	for i, b := range list {
		n := b.Body.Size()
		if n > MaxBody {
			return fmt.Errorf("a metadata block of %d bytes is more than FLAC has room for", n)
		}
		head := binary.BigEndian.AppendUint32(nil, uint32(b.Type)<<24|uint32(n))
		if last && i == len(list)-1 {
			head[0] |= 0x80
		}
		if _, err := dst.Write(head); err != nil {
			return err
		}
		if _, err := io.CopyN(dst, io.NewSectionReader(b.Body, 0, n), n); err != nil {
			return cut(err)
		}
	}
	return nil
}

// Comments reads the comments of a FLAC. Files have one block of them, or none; of more, all are read. What comes in
// front of damage is returned with the error.
func Comments(list []Block) (all []vorbis.Comment, err error) {
	for _, b := range list {
		if b.Type == VorbisComment {
			c, e := parse(b)
			all, err = append(all, c), errors.Join(err, e)
		}
	}
	return all, err
}

func parse(b Block) (vorbis.Comment, error) {
	body, err := b.bytes()
	if err != nil {
		return vorbis.Comment{}, err
	}
	return vorbis.Parse(body)
}

// EditComments returns the blocks with edited comments. What the edit adds goes into the first block of them; if there
// is none, one is put behind STREAMINFO. Of damaged comments those in front of the damage are kept, and the error says so.
func EditComments(list []Block, edit vorbis.Edit) (edited []Block, err error) {
	found := false
	for _, b := range list {
		if b.Type == VorbisComment {
			c, e := parse(b)
			err = errors.Join(err, e)
			edit.Apply(&c)
			b = Made(VorbisComment, c.Bytes())
			found, edit.Add = true, nil
		}
		edited = append(edited, b)
	}
	if !found {
		c := vorbis.Comment{Vendor: vorbis.Vendor}
		edit.Apply(&c)
		edited = slices.Insert(edited, min(1, len(edited)), Made(VorbisComment, c.Bytes()))
	}
	return edited, err
}

// Retag writes the FLAC that src holds anew with other gain tags. All other blocks and the frames stay as they are, and
// so does whatever follows them.
func Retag(dst io.Writer, src *io.SectionReader, g tags.Gains) error {
	list, sound, err := Blocks(src)
	if err != nil {
		return fmt.Errorf("its FLAC header is damaged: %w", err)
	}
	list, err = EditComments(list, vorbis.Edit{Drop: tags.IsGain, Add: g.ReplayGain()})
	if err != nil {
		return err
	}
	w := bufio.NewWriterSize(dst, 64<<10)
	if _, err := w.WriteString(mark); err != nil {
		return err
	}
	if err := Write(w, list, true); err != nil {
		return err
	}
	if err := w.Flush(); err != nil {
		return err
	}
	_, err = io.Copy(dst, io.NewSectionReader(src, sound, src.Size()-sound))
	return err
}
