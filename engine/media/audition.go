package media

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	"evenshelf/engine/audio"
)

// AmongOthers reports whether the sound is a part of a film or of what else is delivered around it: a player that is
// handed the file need not play this track, nor know the codec.
func (i Info) AmongOthers() bool { return i.isFilm() }

// Audition is the sound of one track as a WAV file of 16 bits in one or two channels, which every player knows. It is an
// io.ReadSeeker that is decoded while it is read, from the place that is asked for: nothing is kept, and nothing waits
// for the whole. More channels are mixed as Downmix does, and stay what they are where it does not know them.
type Audition struct {
	tool  *Toolbox
	ctx   context.Context
	f     *os.File
	found finding
	kind  kind
	first float64 // s, when the sound begins; NaN until that has to be known

	head  []byte
	align int64 // bytes of a frame
	size  int64
	at    int64 // the place of the next read

	src    Reader // nil: none is open
	pack   *packer
	buf    audio.Block
	ready  []byte // made, not read yet
	before int64  // the place of ready
}

// Audition opens a track (see OpenTrack) of an open file, which stays the caller's to close, and of so many frames, as a
// reading of it counted. What is missing in the end is silence, and what is more is left out, as is what a WAV file has no
// room for: two channels of 48 kHz may last six hours.
func (t *Toolbox) Audition(ctx context.Context, f *os.File, track int, frames int64) (*Audition, error) {
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	k, err := recognise(f, info.Size())
	if err != nil {
		return nil, err
	}
	if t.FFmpeg() == "" {
		return nil, fmt.Errorf("%w: reading %s needs FFmpeg, and %s", ErrUnsupported, k.container, needFFmpeg)
	}
	l, err := t.look(ctx, f, k, track)
	if err != nil {
		return nil, err
	}
	if !l.info.AmongOthers() {
		return nil, fmt.Errorf("%w: this is not a film", ErrUnsupported)
	}
	a := &Audition{tool: t, ctx: ctx, f: f, kind: k, found: l, first: math.NaN()}
	if err := a.open(0); err != nil {
		return nil, err
	}
	spec := Spec{Format: a.src.Format(), BitDepth: 16}
	a.head = streamHead(spec)
	a.align = int64(spec.Format.Layout.Channels) * 2
	a.size = int64(len(a.head)) + min(max(0, frames), (math.MaxUint32-int64(len(a.head)))/a.align)*a.align
	binary.LittleEndian.PutUint32(a.head[4:], uint32(a.size-8))
	binary.LittleEndian.PutUint32(a.head[len(a.head)-4:], uint32(a.size)-uint32(len(a.head)))
	a.pack, a.buf = newPacker(spec), audio.NewBlock(spec.Format.Layout.Channels, audio.BlockFrames)
	a.before = int64(len(a.head))
	return a, nil
}

// open starts decoding at a frame.
func (a *Audition) open(frame int64) error {
	a.close()
	at := 0.0
	if frame > 0 {
		if math.IsNaN(a.first) {
			if err := a.findFirst(); err != nil {
				return err
			}
		}
		at = a.first + a.found.info.Format.Seconds(frame)
	}
	r, err := a.tool.decode(a.ctx, a.f, a.f.Name(), a.kind, a.found, at)
	if err != nil {
		return err
	}
	r.f = nil // it stays open
	if mixed, err := Downmix(r); err == nil {
		a.src = mixed
	} else {
		a.src = r
	}
	a.found.info.Format.Rate = r.info.Format.Rate // the decoder's word counts
	return nil
}

// findFirst finds out when the sound begins, counted from the begin of the film as FFmpeg seeks it.
func (a *Audition) findFirst() error {
	p, err := a.tool.runProbe(a.ctx, a.f, a.kind)
	if err != nil {
		return err
	}
	at, err := a.tool.firstSound(a.ctx, a.f, a.kind, max(1, a.found.info.Track), a.found.info.Codec)
	a.first = at.seconds() - p.start()
	return err
}

func (a *Audition) close() {
	if a.src != nil {
		a.src.Close()
		a.src = nil
	}
	a.ready = nil
}

// Close ends the decoding.
func (a *Audition) Close() error {
	a.close()
	return nil
}

// Seek implements io.Seeker.
func (a *Audition) Seek(offset int64, whence int) (int64, error) {
	switch whence {
	case io.SeekCurrent:
		offset += a.at
	case io.SeekEnd:
		offset += a.size
	}
	if offset < 0 {
		return 0, errors.New("a place in front of the sound was asked for")
	}
	a.at = offset
	return offset, nil
}

// Read implements io.Reader.
func (a *Audition) Read(p []byte) (int, error) {
	head := int64(len(a.head))
	switch {
	case a.at >= a.size:
		return 0, io.EOF
	case a.at < head:
		n := copy(p, a.head[a.at:])
		a.at += int64(n)
		return n, nil
	}
	if skip := a.at - a.before; skip < 0 || skip > int64(len(a.ready)) {
		frame := (a.at - head) / a.align
		if err := a.open(frame); err != nil {
			return 0, err
		}
		a.before = head + frame*a.align
	} else {
		a.ready, a.before = a.ready[skip:], a.at
	}
	for a.at >= a.before+int64(len(a.ready)) {
		a.before += int64(len(a.ready))
		if err := a.more(); err != nil {
			return 0, err
		}
	}
	n := copy(p[:min(int64(len(p)), a.size-a.at)], a.ready[a.at-a.before:])
	a.at += int64(n)
	return n, nil
}

// more makes the next block ready.
func (a *Audition) more() error {
	n := audio.BlockFrames
	if a.src != nil {
		var err error
		if n, err = a.src.ReadBlock(a.buf); err == io.EOF || errors.Is(err, io.ErrUnexpectedEOF) {
			a.src.Close()
			a.src = nil
		} else if err != nil {
			return err
		}
	} else {
		for _, channel := range a.buf {
			clear(channel)
		}
	}
	a.ready = a.pack.pack(a.buf.Cut(make(audio.Block, len(a.buf)), 0, n))
	return nil
}

// from are FFmpeg's options to begin at a time, s, of a film, for the input, and the filter to go with them; 0 is the first
// sample, whenever that comes.
func from(at float64) (seek []string, filter string) {
	if at == 0 {
		return nil, onTime
	}
	return []string{"-ss", fmt.Sprintf("%.6f", at)}, onTime + ":first_pts=0" // a gap there is silence too
}
