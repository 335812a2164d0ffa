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

// Spread reads src to its end and lets every listener hear all of it in order, as Each does, but at the same
// time: the first on the goroutine that reads, since a block is nearest to the processor that made it, each of
// the others on one of its own. Listeners share the blocks, so they must neither keep nor change them. Spread
// returns when all have heard everything that was read. It returns the number of frames and nil at io.EOF, or
// the error that reading ended with. A panic of the reader or of any listener is the caller's.
func Spread(src Source, first func(Block), others ...func(Block)) (frames int64, err error) {
	channels := src.Format().Layout.Channels
	free := make(chan *shared, ahead)
	for range ahead {
		free <- &shared{block: NewBlock(channels, BlockFrames), view: make(Block, channels)}
	}
	heard := func(s *shared) {
		if s.left.Add(-1) == 0 {
			free <- s
		}
	}
	var running sync.WaitGroup
	var fell atomic.Pointer[any] // what a listener panicked with
	queues := make([]chan *shared, len(others))
	for i, listen := range others {
		queues[i] = make(chan *shared, ahead)
		running.Go(func() {
			for s := range queues[i] {
				hear(listen, s.view, &fell)
				heard(s)
			}
		})
	}
	defer func() { // also when reading or the first listener panics
		for _, q := range queues {
			close(q)
		}
		running.Wait()
		if p := fell.Load(); p != nil {
			panic(*p)
		}
	}()
	for err == nil && fell.Load() == nil {
		s := <-free
		var n int
		n, err = src.ReadBlock(s.block)
		frames += int64(n)
		s.block.Cut(s.view, 0, n)
		s.left.Store(int32(1 + len(others)))
		for _, q := range queues {
			q <- s
		}
		first(s.view)
		heard(s)
	}
	if err == io.EOF {
		err = nil
	}
	return frames, err
}

// hear lets a listener have a block, unless one has panicked already.
func hear(listen func(Block), b Block, fell *atomic.Pointer[any]) {
	defer func() {
		if p := recover(); p != nil {
			fell.CompareAndSwap(nil, &p)
		}
	}()
	if fell.Load() == nil {
		listen(b)
	}
}
