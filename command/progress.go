package command

import (
	"fmt"
	"io"
	"os"
	"time"

	"golang.org/x/term"
)

// tally is how far some work has come.
type tally struct {
	done, files      int
	bytesDone, bytes int64
	seconds          float64 // of audio done
}

// progress is a line at the foot of a terminal; anywhere else it prints nothing, since the results are
// printed line by line as it is.
type progress struct {
	out     io.Writer // nil when there is no terminal
	started time.Time
}

func newProgress(w io.Writer) *progress {
	p := &progress{started: time.Now()}
	if f, ok := w.(*os.File); ok && term.IsTerminal(int(f.Fd())) {
		p.out = w
	}
	return p
}

func (p *progress) draw(t tally) {
	if p.out == nil {
		return
	}
	line := fmt.Sprintf("%d of %d", t.done, t.files)
	if elapsed := time.Since(p.started); t.bytesDone > 0 && elapsed > time.Second {
		left := time.Duration(float64(elapsed) * float64(t.bytes-t.bytesDone) / float64(t.bytesDone))
		line += fmt.Sprintf(" · %.1f hours of audio a minute · about %s left",
			t.seconds/60/elapsed.Seconds(), duration(left.Seconds()))
	}
	fmt.Fprintf(p.out, "\r\x1b[K%s", line)
}

// clear takes the line away before something else is printed.
func (p *progress) clear() {
	if p.out != nil {
		fmt.Fprint(p.out, "\r\x1b[K")
	}
}
