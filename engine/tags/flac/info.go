package flac

import (
	"encoding/binary"
	"io"
)

// Info is what STREAMINFO says (RFC 9639, 8.2).
type Info struct {
	BlockSize     int // frames (samples of one channel) in the shortest FLAC frame but the last
	MaxFrame      int // bytes of the longest FLAC frame; 0: not known
	SampleRate    int
	NChannels     int
	BitsPerSample int
	NSamples      uint64 // of one channel; 0: not known
}

// ReadInfo reads the first of the blocks that Blocks lists; no blocks are an error.
func ReadInfo(list []Block) (Info, error) {
	if len(list) == 0 {
		return Info{}, io.ErrUnexpectedEOF
	}
	var b [infoBytes]byte
	if _, err := list[0].Body.ReadAt(b[:], 0); err != nil {
		return Info{}, cut(err)
	}
	bits := binary.BigEndian.Uint64(b[10:])
	return Info{
		BlockSize:     int(binary.BigEndian.Uint16(b[:])),
		MaxFrame:      int(binary.BigEndian.Uint32(b[6:]) & MaxBody),
		SampleRate:    int(bits >> 44),
		NChannels:     int(bits>>41&7) + 1,
		BitsPerSample: int(bits>>36&31) + 1,
		NSamples:      bits & (1<<36 - 1),
	}, nil
}
