package vorbis

import (
	"bytes"
	"encoding/base64"
	"encoding/binary"
	"errors"
	"image"
	"image/color"
	_ "image/gif"  // for their headers
	_ "image/jpeg" //
	_ "image/png"  //

	"evenshelf/engine/tags"
)

// pictureName is the comment that a picture is put into where there are no blocks for it.
const pictureName = "METADATA_BLOCK_PICTURE"

var errPicture = errors.New("a picture is damaged")

// ParsePicture reads the body of a FLAC picture block (RFC 9639, 8.8), which Ogg has as a comment in base64.
func ParsePicture(b []byte) (p tags.Picture, err error) {
	number := func() (n uint32) {
		if len(b) < 4 {
			err = errPicture
			return 0
		}
		n, b = binary.BigEndian.Uint32(b), b[4:]
		return n
	}
	field := func() (f []byte) {
		n := number()
		if uint64(n) > uint64(len(b)) {
			err = errPicture
			return nil
		}
		f, b = b[:n], b[n:]
		return f
	}
	p.Kind = int(number())
	p.MIME, p.Description = string(field()), string(field())
	for range 4 { // width, height, depth and colours are for the picture itself to say
		number()
	}
	p.Data = bytes.Clone(field())
	return p, err
}

// PictureBytes is a picture as the body of a FLAC picture block. What the picture's own header does not tell is 0, which
// is to say not known.
func PictureBytes(p tags.Picture) []byte {
	width, height, depth, colours := sizeOf(p.Data)
	b := binary.BigEndian.AppendUint32(nil, uint32(p.Kind))
	for _, field := range []string{p.MIME, p.Description} {
		b = append(binary.BigEndian.AppendUint32(b, uint32(len(field))), field...)
	}
	for _, n := range []int{width, height, depth, colours, len(p.Data)} {
		b = binary.BigEndian.AppendUint32(b, uint32(n))
	}
	return append(b, p.Data...)
}

// sizeOf returns the size of a picture, its bits a pixel, and its colours if they are numbered.
func sizeOf(picture []byte) (width, height, depth, colours int) {
	c, _, err := image.DecodeConfig(bytes.NewReader(picture))
	if err != nil {
		return 0, 0, 0, 0
	}
	switch c.ColorModel {
	case color.GrayModel:
		depth = 8
	case color.Gray16Model:
		depth = 16
	case color.NRGBAModel, color.CMYKModel:
		depth = 32
	case color.RGBA64Model:
		depth = 48
	case color.NRGBA64Model:
		depth = 64
	default:
		depth = 24
	}
	if palette, ok := c.ColorModel.(color.Palette); ok {
		depth, colours = 8, len(palette)
	}
	return c.Width, c.Height, depth, colours
}

// picture reads the value of a comment that holds one.
func picture(value string) (tags.Picture, error) {
	b, err := base64.StdEncoding.DecodeString(value)
	if err != nil {
		return tags.Picture{}, err
	}
	return ParsePicture(b)
}

// TakePictures takes the pictures out of the comments; what is damaged stays.
func (c *Comment) TakePictures() (list []tags.Picture) {
	rest := c.Entries[:0:0]
	for _, entry := range c.Entries {
		if name, value := cut(entry); name == pictureName {
			if p, err := picture(value); err == nil {
				list = append(list, p)
				continue
			}
		}
		rest = append(rest, entry)
	}
	c.Entries = rest
	return list
}

// PutPictures puts pictures behind the other comments.
func (c *Comment) PutPictures(list []tags.Picture) {
	for _, p := range list {
		c.Entries = append(c.Entries, pictureName+"="+base64.StdEncoding.EncodeToString(PictureBytes(p)))
	}
}
