package media

import (
	"encoding/binary"
	"math"
)

// packer encodes blocks as interleaved little-endian PCM: floats as they are, integers through the
// quantiser. Its buffers are kept and grow to the largest block seen.
type packer struct {
	bits       int // 16, 24 or 32; float 32 or 64
	float      bool
	quantisers []quantiser // one a channel; nil for float
	ints       [][]int32   // one a channel
	out        []byte
}

func newPacker(spec Spec) *packer {
	p := &packer{bits: spec.BitDepth, float: spec.Float}
	if !spec.Float {
		p.quantisers = newQuantisers(spec)
		p.ints = make([][]int32, len(p.quantisers))
	}
	return p
}

// pack returns the block's bytes, valid until the next call.
func (p *packer) pack(src [][]float32) []byte {
	if len(src) == 0 {
		return nil
	}
	frames := len(src[0])
	if size := frames * p.bits / 8 * len(src); cap(p.out) < size {
		p.out = make([]byte, size)
	} else {
		p.out = p.out[:size]
	}
	if p.float {
		packFloat(p.out, src, p.bits)
		return p.out
	}
	for c, s := range src {
		if cap(p.ints[c]) < frames {
			p.ints[c] = make([]int32, frames)
		}
		p.ints[c] = p.ints[c][:frames]
		p.quantisers[c].quantise(p.ints[c], s, src[0])
	}
	packInts(p.out, p.ints, p.bits)
	return p.out
}

// packInts interleaves the channels of src, each value in its bits low-order bytes first.
//
//go:norace
func packInts(out []byte, src [][]int32, bits int) {
	if len(src) == 2 { // by far the most frequent case: both samples in one write
		packPairs(out, src[0], src[1], bits)
		return
	}
	width := bits / 8
	for c, s := range src {
		at, step := c*width, len(src)*width
		for _, v := range s {
			o := out[at : at+width : at+width]
			o[0], o[1] = byte(v), byte(v>>8)
			if width > 2 {
				o[2] = byte(v >> 16)
			}
			if width > 3 {
				o[3] = byte(v >> 24)
			}
			at += step
		}
	}
}

//go:norace
func packPairs(out []byte, left, right []int32, bits int) {
	right = right[:len(left)]
	switch bits {
	case 16:
		for i, l := range left {
			binary.LittleEndian.PutUint32(out[4*i:], uint32(uint16(l))|uint32(right[i])<<16)
		}
	case 24:
		last := len(left) - 1
		for i, l := range left {
			pair := uint64(uint32(l)&0xFFFFFF) | uint64(uint32(right[i])&0xFFFFFF)<<24
			o := out[6*i:]
			if i == last {
				binary.LittleEndian.PutUint32(o, uint32(pair))
				binary.LittleEndian.PutUint16(o[4:], uint16(pair>>32))
				break
			}
			binary.LittleEndian.PutUint64(o, pair) // two bytes too many, which the next pair overwrites
		}
	case 32:
		for i, l := range left {
			binary.LittleEndian.PutUint64(out[8*i:], uint64(uint32(l))|uint64(uint32(right[i]))<<32)
		}
	}
}

func packFloat(out []byte, src [][]float32, bits int) {
	width := bits / 8
	for c, s := range src {
		at, step := c*width, len(src)*width
		for _, v := range s {
			if bits == 64 {
				binary.LittleEndian.PutUint64(out[at:], math.Float64bits(float64(v)))
			} else {
				binary.LittleEndian.PutUint32(out[at:], math.Float32bits(v))
			}
			at += step
		}
	}
}
