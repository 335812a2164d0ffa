package media

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// Downmix returns a recording of more than two channels as the mix to stereo of ITU-R BS.775-3, Annex 4, Table 2: left and
// right as they are, the centre and each surround −3 dB, a single surround at the back −3 dB in two shares of −3 dB each.
// A bass channel is left out, and nothing is turned down to make room: what passes full scale is for the levelling. Of
// 6.1 and 7.1, which the table does not have, side and back are each taken as the surrounds that they are. One or two
// channels come back as they are. The error wraps ErrUnsupported if a position is not among these, or not known.
func Downmix(r Reader) (Reader, error) {
	info := r.Info()
	from := r.Format().Layout
	if from.Channels <= 2 {
		return r, nil
	}
	m := &downmix{Reader: r, info: info}
	for i := range from.Channels {
		shares, ok := shareOf(from, i)
		if !ok {
			return nil, fmt.Errorf("%w: a mix to stereo is not laid down for its loudspeaker positions (%s)", ErrUnsupported, from)
		}
		m.shares = append(m.shares, shares)
	}
	m.info.Mixed, m.info.Format.Layout = true, audio.Stereo
	m.info.BitRate = info.BitRate * 2 / from.Channels
	m.buf, m.view = audio.NewBlock(from.Channels, audio.BlockFrames), make(audio.Block, from.Channels)
	return m, nil
}

// shareOf is how much of a channel goes to the left and to the right.
func shareOf(l audio.Layout, channel int) (share [2]float64, ok bool) {
	const down = math.Sqrt2 / 2
	switch l.Position(channel) {
	case audio.FrontLeft:
		return [2]float64{1, 0}, true
	case audio.FrontRight:
		return [2]float64{0, 1}, true
	case audio.FrontCentre:
		return [2]float64{down, down}, true
	case audio.SideLeft, audio.BackLeft:
		return [2]float64{down, 0}, true
	case audio.SideRight, audio.BackRight:
		return [2]float64{0, down}, true
	case audio.BackCentre:
		return [2]float64{0.5, 0.5}, true
	case audio.LowFrequency:
		return share, true
	}
	return share, false
}

// downmix mixes what a reader reads.
type downmix struct {
	Reader
	info      Info
	shares    [][2]float64 // of each channel to the left and right
	buf, view audio.Block
}

func (m *downmix) Format() audio.Format { return m.info.Format }
func (m *downmix) Info() Info           { return m.info }

// Damage implements Damaged.
func (m *downmix) Damage() string {
	if d, ok := m.Reader.(Damaged); ok {
		return d.Damage()
	}
	return ""
}

// ReadBlock implements audio.Source.
func (m *downmix) ReadBlock(dst audio.Block) (int, error) {
	n, err := m.Reader.ReadBlock(m.buf.Cut(m.view, 0, min(dst.Frames(), audio.BlockFrames)))
	mix(dst, m.view, m.shares, n)
	return n, err
}

// mix sums n frames of all channels into two, each by its shares.
func mix(dst, src audio.Block, shares [][2]float64, n int) {
	for side, out := range dst {
		for i := range out[:n] {
			sum := 0.0
			for c, x := range src {
				sum += shares[c][side] * float64(x[i])
			}
			out[i] = float32(sum)
		}
	}
}
