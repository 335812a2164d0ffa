package level

import (
	"encoding/binary"
	"io"
	"os"
	"syscall"
	"unsafe"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

const (
	// mostKept is how many bytes of decoded sound are kept for one recording: an hour and a half of 16 bits in stereo.
	mostKept = 1 << 30
	// roomLeft is the share of the free disk space that is taken for it at the most.
	roomLeft = 0.25
)

// decoded is a recording's sound as it was decoded the first time, in a file without a name, so that what renders it
// need not decode it again: that costs more than all the rest of a rendering into a meter. It is given up, and decoded
// again instead, where there is no room for it or too much of it. It is never relied on for more than one job.
type decoded struct {
	f      *os.File
	format audio.Format
	short  bool  // samples are whole numbers of 16 bits; else float32
	room   int64 // bytes that may be written
	size   int64 // bytes written
	buf    []byte
	ints   []int16
}

// newDecoded returns room for what src is going to deliver; nil where there is none, or decoding costs nothing.
func newDecoded(src media.Reader) *decoded {
	info := src.Info()
	if info.Container == "wav" {
		return nil
	}
	f, err := os.CreateTemp("", "evenshelf-sound-")
	if err != nil {
		return nil
	}
	d := &decoded{f: f, format: src.Format(), short: info.BitDepth > 0 && info.BitDepth <= 16 && !info.Float, room: mostKept}
	var disk syscall.Statfs_t
	if err := syscall.Fstatfs(int(f.Fd()), &disk); err == nil {
		d.room = min(d.room, int64(roomLeft*float64(disk.Bavail)*float64(disk.Bsize)))
	}
	if os.Remove(f.Name()) != nil || info.Frames*d.frameBytes() > d.room {
		d.close()
		return nil
	}
	d.buf, d.ints = make([]byte, 0, headBytes+audio.BlockFrames*d.frameBytes()), make([]int16, audio.BlockFrames)
	return d
}

// headBytes go before every block: how many frames it has.
const headBytes = 4

func (d *decoded) frameBytes() int64 { return int64(d.format.Layout.Channels) * d.sampleBytes() }

func (d *decoded) sampleBytes() int64 {
	if d.short {
		return 2
	}
	return 4
}

// whole reports whether there is something to read.
func (d *decoded) whole() bool { return d != nil && d.f != nil }

// write keeps a block: its channels one after another.
func (d *decoded) write(b audio.Block) {
	if !d.whole() || b.Frames() == 0 {
		return
	}
	d.buf = binary.NativeEndian.AppendUint32(d.buf[:0], uint32(b.Frames()))
	for _, x := range b {
		if !d.short {
			d.buf = append(d.buf, bytesOf(x)...)
			continue
		}
		whole := d.ints[:len(x)]
		for i, v := range x {
			whole[i] = int16(v * (1 << 15))
		}
		d.buf = append(d.buf, bytesOf(whole)...)
	}
	d.size += int64(len(d.buf))
	if _, err := d.f.Write(d.buf); err != nil || d.size > d.room {
		d.close()
	}
}

func (d *decoded) close() {
	if d.whole() {
		d.f.Close()
		d.f = nil
	}
}

// source returns a reader from the start.
func (d *decoded) source() audio.Source {
	return &replay{decoded: d}
}

// replay reads what has been kept.
type replay struct {
	*decoded
	at     int64 // in the file, where the block under way begins
	frames int   // of that block
	done   int   // of those, read
}

func (r *replay) Format() audio.Format { return r.format }

// ReadBlock implements audio.Source.
func (r *replay) ReadBlock(dst audio.Block) (int, error) {
	if r.done == r.frames {
		if r.frames > 0 {
			r.at += headBytes + int64(r.frames)*r.frameBytes()
		}
		if r.at >= r.size {
			return 0, io.EOF
		}
		var head [headBytes]byte
		if _, err := r.f.ReadAt(head[:], r.at); err != nil {
			return 0, err
		}
		r.frames, r.done = int(binary.NativeEndian.Uint32(head[:])), 0
	}
	n := min(dst.Frames(), r.frames-r.done)
	for c, x := range dst {
		at := r.at + headBytes + (int64(c)*int64(r.frames)+int64(r.done))*r.sampleBytes()
		x, whole := x[:n], r.ints[:n]
		into := bytesOf(x)
		if r.short {
			into = bytesOf(whole)
		}
		if _, err := r.f.ReadAt(into, at); err != nil {
			return 0, err
		}
		if r.short {
			for i, v := range whole {
				x[i] = float32(v) / (1 << 15)
			}
		}
	}
	r.done += n
	return n, nil
}

// bytesOf is a view of samples as they lie in memory.
func bytesOf[T float32 | int16](x []T) []byte {
	return unsafe.Slice((*byte)(unsafe.Pointer(unsafe.SliceData(x))), len(x)*int(unsafe.Sizeof(*new(T))))
}
