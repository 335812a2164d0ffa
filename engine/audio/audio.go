// Package audio holds the vocabulary every other engine package speaks: units, channel layouts, blocks
// of samples, and the two interfaces sound flows through.
//
// Samples are planar float32, one slice per channel, full scale ±1.0. Values past ±1.0 are legal (a
// lossy decoder produces them) and are kept. 24-bit integers fit a float32 exactly. Arithmetic inside
// kernels is float64.
package audio

import (
	"fmt"
	"io"
	"math"
	"math/bits"
	"strconv"
	"strings"
)

// Speaker is a set of loudspeaker positions in the bit order of the WAVE_FORMAT_EXTENSIBLE channel mask.
type Speaker uint32

// The positions of the WAVE_FORMAT_EXTENSIBLE channel mask.
const (
	FrontLeft Speaker = 1 << iota
	FrontRight
	FrontCentre
	LowFrequency
	BackLeft
	BackRight
	FrontLeftOfCentre
	FrontRightOfCentre
	BackCentre
	SideLeft
	SideRight
	TopCentre
	TopFrontLeft
	TopFrontCentre
	TopFrontRight
	TopBackLeft
	TopBackCentre
	TopBackRight
)

// Layout says how many channels there are and, where known, which loudspeaker each one feeds.
// Channels are in ascending order of their mask bit. A zero Mask means positions are not known.
type Layout struct {
	Channels int
	Mask     Speaker
}

// The layouts that need no channel mask to be understood.
var (
	Mono   = Layout{1, FrontCentre}
	Stereo = Layout{2, FrontLeft | FrontRight}
)

// usual gives the customary layout of a file that has a channel count but no mask.
var usual = map[int]Speaker{
	1: FrontCentre,
	2: FrontLeft | FrontRight,
	3: FrontLeft | FrontRight | FrontCentre,
	4: FrontLeft | FrontRight | BackLeft | BackRight,
	5: FrontLeft | FrontRight | FrontCentre | BackLeft | BackRight,
	6: FrontLeft | FrontRight | FrontCentre | LowFrequency | BackLeft | BackRight,
	7: FrontLeft | FrontRight | FrontCentre | LowFrequency | BackCentre | SideLeft | SideRight,
	8: FrontLeft | FrontRight | FrontCentre | LowFrequency | BackLeft | BackRight | SideLeft | SideRight,
}

// UsualLayout returns the customary layout for a channel count; past 8 channels positions stay unknown.
func UsualLayout(channels int) Layout { return Layout{channels, usual[channels]} }

// Position returns the loudspeaker of channel i, or 0 where it is not known.
func (l Layout) Position(i int) Speaker {
	if bits.OnesCount32(uint32(l.Mask)) != l.Channels {
		return 0
	}
	m := uint32(l.Mask)
	for ; i > 0; i-- {
		m &= m - 1
	}
	return Speaker(m & -m)
}

// String names the layout as people do: mono, stereo, 5.1, 7.1.4, or a channel count.
func (l Layout) String() string {
	switch {
	case l.Channels == 1:
		return "mono"
	case l.Channels == 2:
		return "stereo"
	case l.Mask&LowFrequency != 0:
		const overhead = TopCentre | TopFrontLeft | TopFrontCentre | TopFrontRight | TopBackLeft | TopBackCentre | TopBackRight
		if tops := bits.OnesCount32(uint32(l.Mask & overhead)); tops > 0 {
			return fmt.Sprintf("%d.1.%d", l.Channels-1-tops, tops)
		}
		return fmt.Sprintf("%d.1", l.Channels-1)
	default:
		return fmt.Sprintf("%d channels", l.Channels)
	}
}

// Format is what a stream of samples needs to be understood.
type Format struct {
	Rate   int // frames a second, Hz
	Layout Layout
}

// Seconds returns the duration of a number of frames.
func (f Format) Seconds(frames int64) float64 { return float64(frames) / float64(f.Rate) }

// Clock writes a place in a recording, in seconds, as people do, to a tenth: 3:07.5, 1:02:03.4.
func Clock(seconds float64) string {
	tenths := int64(math.Round(max(0, seconds) * 10))
	h, m, s := tenths/36000, tenths/600%60, tenths/10%60
	if h > 0 {
		return fmt.Sprintf("%d:%02d:%02d.%d", h, m, s, tenths%10)
	}
	return fmt.Sprintf("%d:%02d.%d", m, s, tenths%10)
}

// Number writes a figure with a fixed count of decimals and a true minus sign, as wide as a digit and as
// high as a plus. What rounds to zero has no sign.
func Number(v float64, decimals int) string {
	s := strconv.FormatFloat(math.Abs(v), 'f', decimals, 64)
	if v < 0 && strings.Trim(s, "0.") != "" {
		return "−" + s
	}
	return s
}

// Count writes a whole number with its thousands apart: 100,000.
func Count[I int | int64](n I) string {
	s := strconv.FormatInt(int64(n), 10)
	for i := len(s) - 3; i > 0 && s[i-1] != '-'; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}

// Block is planar sound: Block[c][i] is frame i of channel c. All channels have the same length.
type Block [][]float32

// NewBlock returns a block of silence. The channels share one backing array.
func NewBlock(channels, frames int) Block {
	flat := make([]float32, channels*frames)
	b := make(Block, channels)
	for c := range b {
		b[c], flat = flat[:frames:frames], flat[frames:]
	}
	return b
}

// Frames returns the number of frames in the block.
func (b Block) Frames() int {
	if len(b) == 0 {
		return 0
	}
	return len(b[0])
}

// Cut sets dst to frames [from, to) of b without copying samples and returns it, so that a caller that
// keeps dst allocates nothing. dst must have as many channels as b.
func (b Block) Cut(dst Block, from, to int) Block {
	for c := range b {
		dst[c] = b[c][from:to]
	}
	return dst
}

// Source streams planar sound.
//
// ReadBlock fills each channel of dst from its start and reports n frames, 0 ≤ n ≤ dst.Frames().
// Handle n before err. io.EOF follows the last frame; io.ErrUnexpectedEOF says the recording ends
// earlier than it promises (what was there has been delivered). Implementations must not keep dst.
type Source interface {
	Format() Format
	ReadBlock(dst Block) (n int, err error)
}

// Sink takes planar sound. WriteBlock must not keep or change src. Close ends the stream; what was
// written is complete only if Close returns nil.
type Sink interface {
	WriteBlock(src Block) error
	Close() error
}

// BlockFrames is the block length the engine passes around: some 90 ms at 44.1 kHz, small enough for
// the cache, large enough that per-block costs vanish.
const BlockFrames = 4096

// Each reads src to its end in blocks of at most BlockFrames and calls fn with each. The block is
// reused. It returns the number of frames read and nil at io.EOF, or the first error.
func Each(src Source, fn func(Block) error) (frames int64, err error) {
	channels := src.Format().Layout.Channels
	buf, view := NewBlock(channels, BlockFrames), make(Block, channels)
	for {
		n, err := src.ReadBlock(buf)
		if n > 0 {
			frames += int64(n)
			if e := fn(buf.Cut(view, 0, n)); e != nil {
				return frames, e
			}
		}
		switch {
		case err == io.EOF:
			return frames, nil
		case err != nil:
			return frames, err
		}
	}
}
