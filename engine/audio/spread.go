package audio

import (
	"io"
	"sync"
	"sync/atomic"
)

// ahead is how many blocks the reader may be in front of the slowest listener.
const ahead = 4

// shared is a block on its way to several listeners.
type shared struct {
	block, view Block
	left        atomic.Int32 // listeners that have not had it yet
}

// Spread reads src to its end and lets every listener hear all of it in order, as Each does, but each on a
// goroutine of its own while the next blocks are being read: one recording keeps as many cores busy as
// there are listeners, and decoding goes on meanwhile. Listeners share the blocks, so they must neither
// keep nor change them. Spread returns when all have heard everything that was read. It returns the number
// of frames and nil at io.EOF, or the error that reading ended with.
func Spread(src Source, listeners ...func(Block)) (frames int64, err error) {
	channels := src.Format().Layout.Channels
	free := make(chan *shared, ahead)
	for range ahead {
		free <- &shared{block: NewBlock(channels, BlockFrames), view: make(Block, channels)}
	}
	var running sync.WaitGroup
	queues := make([]chan *shared, len(listeners))
	for i, listen := range listeners {
		queues[i] = make(chan *shared, ahead)
		running.Go(func() {
			for s := range queues[i] {
				listen(s.view)
				if s.left.Add(-1) == 0 {
					free <- s
				}
			}
		})
	}
	for err == nil {
		s := <-free
		var n int
		n, err = src.ReadBlock(s.block)
		if n == 0 {
			free <- s
			continue
		}
		frames += int64(n)
		s.block.Cut(s.view, 0, n)
		s.left.Store(int32(len(listeners)))
		for _, q := range queues {
			q <- s
		}
	}
	for _, q := range queues {
		close(q)
	}
	running.Wait()
	if err == io.EOF {
		err = nil
	}
	return frames, err
}
