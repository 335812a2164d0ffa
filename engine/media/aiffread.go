package media

import (
	"context"
	"encoding/binary"
	"os"
)

func newAIFFReader(ctx context.Context, f *os.File, path string, h *aiffHeader) *pcmReader {
	coding := aiffCodings[h.coding]
	info := Info{
		Container: "aiff", Codec: h.codec(), Format: h.format, Frames: h.frames, BitDepth: h.depth,
		Float: coding.float, Decoder: "evenshelf aiff",
	}
	unpack := unpackerFor(h.width, coding.float)
	if !coding.little {
		unpack = turned(h.width, unpack)
	}
	return newPCMReader(ctx, f, path, info, h.data, unpack, h.align())
}

// turned is an unpacker for samples with the high byte first. It turns them round where they are: nobody reads them
// again.
func turned(width int, unpack unpacker) unpacker {
	return func(dst [][]float32, raw []byte, n int) {
		raw = raw[:n*len(dst)*width]
		turn(raw, width)
		unpack(dst, raw, n)
	}
}

// turn changes samples of so many bytes between low and high byte first, in place; of one byte, between unsigned and
// two's complement, which are the other difference between WAV and AIFF.
//
//go:norace
func turn(b []byte, width int) {
	switch width {
	case 1:
		for i := range b {
			b[i] ^= 0x80
		}
	case 2:
		for ; len(b) >= 8; b = b[8:] {
			v := le64(b)
			binary.LittleEndian.PutUint64(b, v>>8&0x00FF00FF00FF00FF|v&0x00FF00FF00FF00FF<<8)
		}
		for ; len(b) >= 2; b = b[2:] {
			b[0], b[1] = b[1], b[0]
		}
	case 3:
		for ; len(b) >= 3; b = b[3:] {
			b[0], b[2] = b[2], b[0]
		}
	case 4:
		for ; len(b) >= 4; b = b[4:] {
			binary.LittleEndian.PutUint32(b, be32(b))
		}
	case 8:
		for ; len(b) >= 8; b = b[8:] {
			binary.LittleEndian.PutUint64(b, be64(b))
		}
	}
}
