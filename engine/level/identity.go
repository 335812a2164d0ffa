package level

import (
	"encoding/binary"
	"encoding/hex"

	"github.com/zeebo/xxh3"

	"evenshelf/engine/audio"
)

// fingerprint hashes a recording's decoded samples, so that it is known again under another name, with other tags or,
// if nothing is lost by it, in another format. It is XXH3 of 128 bits, over the little-endian float32 samples of each
// channel and then over the channels' hashes, the rate and their number: fast enough to cost nothing beside decoding.
// It tells recordings apart, not forgeries. The same lossy file has another hash where another decoder reads it.
type fingerprint struct {
	format   audio.Format
	channels []*xxh3.Hasher128
	swapped  []byte // only where floats lie the other way round in memory
}

func newFingerprint(f audio.Format) *fingerprint {
	p := &fingerprint{format: f}
	for range f.Layout.Channels {
		p.channels = append(p.channels, xxh3.New128())
	}
	return p
}

var littleEndian = binary.NativeEndian.Uint16([]byte{1, 0}) == 1

func (p *fingerprint) write(b audio.Block) {
	for c, x := range b {
		p.channels[c].Write(p.bytes(x))
	}
}

// bytes is a view of samples as they are hashed.
func (p *fingerprint) bytes(x []float32) []byte {
	view := bytesOf(x)
	if littleEndian {
		return view
	}
	p.swapped = p.swapped[:0]
	for i := range x {
		p.swapped = binary.LittleEndian.AppendUint32(p.swapped, binary.NativeEndian.Uint32(view[4*i:]))
	}
	return p.swapped
}

// alike reports whether the channels are left and right, and the same.
func (p *fingerprint) alike() bool {
	return p.format.Layout == audio.Stereo && p.channels[0].Sum128() == p.channels[1].Sum128()
}

// sum is the hash in hexadecimal.
func (p *fingerprint) sum() string {
	all := binary.LittleEndian.AppendUint32(nil, uint32(p.format.Rate))
	all = binary.LittleEndian.AppendUint32(all, uint32(len(p.channels)))
	for _, c := range p.channels {
		h := c.Sum128().Bytes()
		all = append(all, h[:]...)
	}
	h := xxh3.Hash128(all).Bytes()
	return hex.EncodeToString(h[:])
}
