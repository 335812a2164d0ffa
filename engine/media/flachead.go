package media

import (
	"bytes"
	"fmt"
	"io"
	"os"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/meta"
)

// FFmpeg joins comments of one name and renames some. So when it encodes a FLAC from
// a FLAC, it only leaves room in front of the sound, and what belongs there is put in afterwards.

const (
	flacFirst   = 4 + 4 + 34 // where the block after STREAMINFO begins
	flacPadding = 8 << 10    // room left for later changes of tags
	maxBlock    = 1<<24 - 1  // bytes of one block: its length has 24 bits
)

// flacHead returns the metadata blocks of a delivery as bytes, without STREAMINFO and none of them marked
// as the last. Pictures are left out, the last first, where all of it is more than one padding block.
func flacHead(spec Spec, tags *tagSource) ([]byte, error) {
	for blocks := flacTags(spec, tags); ; blocks = blocks[:len(blocks)-1] {
		var buf bytes.Buffer
		_, err := guard(func() (*flac.Encoder, error) {
			return flac.NewEncoder(&buf, &meta.StreamInfo{NChannels: 1, BitsPerSample: 16}, append(blocks, &meta.Block{Header: meta.Header{Type: meta.TypePadding}})...)
		})
		if err != nil {
			return nil, err
		}
		head := buf.Bytes()[flacFirst : buf.Len()-4] // the empty padding only kept the others from being last
		if len(head) <= maxBlock-flacPadding || len(blocks) == 1 {
			return head, nil
		}
	}
}

// putHead overwrites all blocks after STREAMINFO with head and a padding that fills the rest.
func putHead(f *os.File, head []byte) error {
	end, at := int64(0), int64(flacFirst)
	for end == 0 {
		b, err := readAt(f, at, 4)
		if err != nil {
			return err
		}
		if len(b) < 4 {
			return io.ErrUnexpectedEOF
		}
		at += 4 + int64(b[1])<<16 + int64(b[2])<<8 + int64(b[3])
		if b[0]&0x80 != 0 {
			end = at
		}
	}
	left := end - flacFirst - int64(len(head)) - 4
	if left < 0 || left > maxBlock {
		return fmt.Errorf("FFmpeg left %d bytes too little for the tags", -left)
	}
	padding := make([]byte, 4+left)
	padding[0] = 0x80 | byte(meta.TypePadding)
	padding[1], padding[2], padding[3] = byte(left>>16), byte(left>>8), byte(left)
	_, err := f.WriteAt(append(head, padding...), flacFirst)
	return err
}
