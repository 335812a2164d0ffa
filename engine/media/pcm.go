package media

import (
	"encoding/binary"
	"math"
)

// unpacker decodes n interleaved frames from raw into the channels of dst. It is a pure kernel; len(dst)
// is the channel count.
type unpacker func(dst [][]float32, raw []byte, n int)

// unpackerFor returns the kernel for PCM in containers of so many bytes a sample, or nil if there is
// none. Integers are left-justified in their container (as WAV demands), so the container gives the scale.
func unpackerFor(bytes int, float bool) unpacker {
	switch {
	case float && bytes == 4:
		return unpackFloat32
	case float && bytes == 8:
		return unpackFloat64
	case float:
		return nil
	}
	switch bytes {
	case 1:
		return unpackU8
	case 2:
		return unpackS16
	case 3:
		return unpackS24
	case 4:
		return unpackS32
	}
	return nil
}

func unpackU8(dst [][]float32, raw []byte, n int) {
	for c, d := range dst {
		for i, at := 0, c; i < n; i, at = i+1, at+len(dst) {
			d[i] = float32(int(raw[at])-128) * (1.0 / (1 << 7))
		}
	}
}

//go:norace
func unpackS16(dst [][]float32, raw []byte, n int) {
	const scale = 1.0 / (1 << 15)
	if len(dst) == 2 { // by far the most frequent case: both samples in one read
		l, r, raw := dst[0][:n], dst[1][:n], raw[:4*n]
		for i := range l {
			v := binary.LittleEndian.Uint32(raw[4*i:])
			l[i], r[i] = float32(int16(v))*scale, float32(int32(v)>>16)*scale
		}
		return
	}
	step := 2 * len(dst)
	for c, d := range dst {
		for i, at := 0, 2*c; i < n; i, at = i+1, at+step {
			d[i] = float32(int16(binary.LittleEndian.Uint16(raw[at:]))) * scale
		}
	}
}

//go:norace
func unpackS24(dst [][]float32, raw []byte, n int) {
	if len(dst) == 2 { // each sample is in the upper three bytes of a 32-bit integer
		const scale = 1.0 / (1 << 31)
		l, r, raw := dst[0][:n], dst[1][:n], raw[:6*n]
		for i := range l {
			s := raw[6*i : 6*i+6]
			a, b := binary.LittleEndian.Uint32(s)<<8, binary.LittleEndian.Uint32(s[2:])&^0xFF
			l[i], r[i] = float32(int32(a))*scale, float32(int32(b))*scale
		}
		return
	}
	step := 3 * len(dst)
	for c, d := range dst {
		for i, at := 0, 3*c; i < n; i, at = i+1, at+step {
			s := raw[at : at+3 : at+3]
			v := int32(uint32(s[0])<<8|uint32(s[1])<<16|uint32(s[2])<<24) >> 8
			d[i] = float32(v) * (1.0 / (1 << 23))
		}
	}
}

//go:norace
func unpackS32(dst [][]float32, raw []byte, n int) {
	const scale = 1.0 / (1 << 31)
	if len(dst) == 2 {
		l, r, raw := dst[0][:n], dst[1][:n], raw[:8*n]
		for i := range l {
			v := binary.LittleEndian.Uint64(raw[8*i:])
			l[i], r[i] = float32(int32(v))*scale, float32(int32(v>>32))*scale
		}
		return
	}
	step := 4 * len(dst)
	for c, d := range dst {
		for i, at := 0, 4*c; i < n; i, at = i+1, at+step {
			d[i] = float32(int32(binary.LittleEndian.Uint32(raw[at:]))) * scale
		}
	}
}

//go:norace
func unpackFloat32(dst [][]float32, raw []byte, n int) {
	if len(dst) == 2 {
		l, r, raw := dst[0][:n], dst[1][:n], raw[:8*n]
		for i := range l {
			v := binary.LittleEndian.Uint64(raw[8*i:])
			l[i], r[i] = math.Float32frombits(uint32(v)), math.Float32frombits(uint32(v>>32))
		}
		return
	}
	step := 4 * len(dst)
	for c, d := range dst {
		for i, at := 0, 4*c; i < n; i, at = i+1, at+step {
			d[i] = math.Float32frombits(binary.LittleEndian.Uint32(raw[at:]))
		}
	}
}

func unpackFloat64(dst [][]float32, raw []byte, n int) {
	step := 8 * len(dst)
	for c, d := range dst {
		for i, at := 0, 8*c; i < n; i, at = i+1, at+step {
			d[i] = float32(math.Float64frombits(binary.LittleEndian.Uint64(raw[at:])))
		}
	}
}

// packer encodes blocks as interleaved little-endian PCM: floats as they are, integers through the
// quantiser. Its buffers are kept and grow to the largest block seen.
type packer struct {
	bits       int // 16, 24 or 32; float 32 or 64
	float      bool
	quantisers []quantiser // one a channel; nil for float
	ints       []int32
	out        []byte
}

func newPacker(spec Spec) *packer {
	p := &packer{bits: spec.BitDepth, float: spec.Float}
	if !spec.Float {
		p.quantisers = newQuantisers(spec)
	}
	return p
}

// pack returns the block's bytes, valid until the next call.
func (p *packer) pack(src [][]float32) []byte {
	if len(src) == 0 {
		return nil
	}
	frames, width := len(src[0]), p.bits/8
	if size := frames * width * len(src); cap(p.out) < size {
		p.out = make([]byte, size)
	} else {
		p.out = p.out[:size]
	}
	if !p.float && cap(p.ints) < frames {
		p.ints = make([]int32, frames)
	}
	step := width * len(src)
	for c, s := range src {
		out := p.out[min(c*width, len(p.out)):]
		if p.float {
			packFloat(out, s, p.bits, step)
			continue
		}
		ints := p.ints[:frames]
		p.quantisers[c].quantise(ints, s)
		packInt(out, ints, p.bits, step)
	}
	return p.out
}

// packInt stores each value in its bits low-order bytes first, step bytes apart.
func packInt(out []byte, ints []int32, bits, step int) {
	at := 0
	switch bits {
	case 16:
		for _, v := range ints {
			binary.LittleEndian.PutUint16(out[at:], uint16(v))
			at += step
		}
	case 24:
		for _, v := range ints {
			o := out[at : at+3 : at+3]
			o[0], o[1], o[2] = byte(v), byte(v>>8), byte(v>>16)
			at += step
		}
	case 32:
		for _, v := range ints {
			binary.LittleEndian.PutUint32(out[at:], uint32(v))
			at += step
		}
	}
}

func packFloat(out []byte, src []float32, bits, step int) {
	at := 0
	for _, v := range src {
		if bits == 64 {
			binary.LittleEndian.PutUint64(out[at:], math.Float64bits(float64(v)))
		} else {
			binary.LittleEndian.PutUint32(out[at:], math.Float32bits(v))
		}
		at += step
	}
}
