package media

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/ogg"
	"evenshelf/engine/tags/vorbis"
)

// oggCarrier puts the comments of a Vorbis or Opus stream, as they are, in place of those that FFmpeg writes.
type oggCarrier struct{ comment vorbis.Comment }

// newOggCarrier chooses the comments of a delivery. From the target's own codec they come with all that is in their block; of
// a chained file they are the first link's.
func (t *Toolbox) newOggCarrier(ctx context.Context, spec Spec, src *tagSource) (*oggCarrier, error) {
	if src != nil && src.kind.container == "ogg" {
		if codec, c, err := ogg.Comments(src.kind.section(src.f)); err == nil && codec == spec.Codec {
			vorbis.Edit{Drop: tags.Stale}.Apply(&c)
			return &oggCarrier{c}, nil
		}
	}
	c, pictures, err := t.commentsOf(ctx, src)
	c.PutPictures(pictures)
	c.Fit(ogg.MaxComments)
	return &oggCarrier{c}, err
}

func (c *oggCarrier) args() []string { return nil }

// finish writes the file anew, in itself: all of it is moved back so far that its new front, which is longer by at
// most that much, never reaches what is still to be read.
func (c *oggCarrier) finish(f *os.File) error {
	stat, err := f.Stat()
	if err != nil {
		return err
	}
	size, length := stat.Size(), int64(len(c.comment.Bytes()))
	room := length + length/128 + 64<<10 // lacing is a byte in 255, heads of pages are fewer
	if err := moveBack(f, 0, size, room); err != nil {
		return err
	}
	out := &counter{w: io.NewOffsetWriter(f, 0)}
	if err := ogg.Edit(out, io.NewSectionReader(f, room, size), c.put); err != nil {
		return err
	}
	return f.Truncate(out.n)
}

// put changes FFmpeg's comments to the source's. Who encoded it is FFmpeg's to say. What follows the entries is the
// codec's framing, or binary data that Opus asks to keep if its first bit is set (RFC 7845, 5.2).
func (c *oggCarrier) put(codec string, written *vorbis.Comment) {
	written.Entries = c.comment.Entries
	if rest := c.comment.Rest; codec == "opus" && len(rest) > 0 && rest[0]&1 == 1 {
		written.Rest = rest
	}
}

// checkChain refuses chained files that FFmpeg would decode wrongly.
func checkChain(f *os.File, k kind) error {
	stat, err := f.Stat()
	if err != nil {
		return err
	}
	return otherOgg(ogg.CheckChain(k.section(f), stat.Size()-k.start))
}

// otherOgg makes an error of this package of one that says that there is no help for a file.
func otherOgg(err error) error {
	if errors.Is(err, ogg.ErrOther) || errors.Is(err, ogg.ErrUnlike) {
		return fmt.Errorf("%w: %w", ErrUnsupported, err)
	}
	return err
}

// counter counts what is written.
type counter struct {
	w io.Writer
	n int64
}

func (c *counter) Write(p []byte) (int, error) {
	n, err := c.w.Write(p)
	c.n += int64(n)
	return n, err
}
