package level

import "evenshelf/engine/audio"

// A recording whose two channels are the same, bit for bit, as speech often is kept, is rendered as one: that is half the
// work. Nothing comes out otherwise by a bit, since what is summed over both channels is doubled instead, which is exact.

// half is the first channel of a source of two.
type half struct {
	audio.Source
	both  audio.Block // to read into
	other []float32
}

func halfOf(src audio.Source) *half {
	return &half{src, make(audio.Block, 2), make([]float32, audio.BlockFrames)}
}

func (h *half) Format() audio.Format {
	return audio.Format{Rate: h.Source.Format().Rate, Layout: audio.Mono}
}

// ReadBlock implements audio.Source.
func (h *half) ReadBlock(dst audio.Block) (int, error) {
	n := min(dst.Frames(), len(h.other))
	h.both[0], h.both[1] = dst[0][:n], h.other[:n]
	return h.Source.ReadBlock(h.both)
}

// twice hands one channel on as two.
type twice struct {
	audio.Sink
	both audio.Block
}

func twiceTo(sink audio.Sink) *twice { return &twice{sink, make(audio.Block, 2)} }

// WriteBlock implements audio.Sink.
func (t *twice) WriteBlock(b audio.Block) error {
	t.both[0], t.both[1] = b[0], b[0]
	return t.Sink.WriteBlock(t.both)
}
