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
