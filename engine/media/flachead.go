package media

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"os"
	"slices"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/flac"
	"evenshelf/engine/tags/vorbis"
)

// FFmpeg joins comments of one name, renames some and drops the blocks it has no use for. So encoders only leave room
// in front of the sound, and what belongs there is put in afterwards, together with a seek table of the new sound.

const flacPadding = 8 << 10 // bytes left for later changes of tags

// flacCarrier is the metadata of a delivery: what stands behind STREAMINFO, in order.
type flacCarrier struct {
	blocks []flac.Block // noPoints is one of them
	room   int64        // bytes that are asked for: with the table, but without the padding's header
}

// newFLACCarrier chooses the metadata of a delivery: from a FLAC every block, from others what FLAC has words for.
func (t *Toolbox) newFLACCarrier(ctx context.Context, spec Spec, src *tagSource) (*flacCarrier, error) {
	if list := flacSource(src); list != nil {
		return flacHead(spec, list), nil
	}
	c, pictures, err := t.commentsOf(ctx, src)
	return flacHead(spec, flac.Of(c, pictures)), err
}

// flacHead makes the metadata of a delivery of blocks. Every block is carried as it is, but for those that a new encoding
// makes anew and the comments that a new level makes wrong. Where loudspeakers are not the usual ones, a comment names
// them; one that says so already stays.
func flacHead(spec Spec, list []flac.Block) *flacCarrier {
	comments, _ := flac.Comments(list)
	layout, named := namedLayout(comments, spec.Format.Layout.Channels)
	named = named && layout == spec.Format.Layout
	edit := vorbis.Edit{Vendor: vorbis.Vendor, Drop: func(name string) bool { return tags.Stale(name) || !named && isMask(name) }}
	if mask := unusualMask(spec.Format.Layout); mask != "" && !named {
		edit.Add = [][2]string{{vorbis.Mask, mask}}
	}
	length := int64(0)
	if info, err := flac.ReadInfo(list); err == nil {
		length = flac.SeekBytes(info.NSamples, info.SampleRate)
	}
	list, _ = flac.EditComments(list, edit) // of damaged ones, those in front of the damage
	own := slices.IndexFunc(list, isSeekTable)
	c := &flacCarrier{}
	if own < 0 {
		c.blocks = append(c.blocks, noPoints)
	}
	for i, b := range list {
		switch {
		case i == own: // it keeps its place
			c.blocks = append(c.blocks, noPoints)
		case !slices.Contains([]byte{flac.StreamInfo, flac.Padding, flac.SeekTable, flac.Forbidden}, b.Type):
			c.blocks = append(c.blocks, b)
		}
	}
	c.room = min(flac.Size(c.blocks)+length+flacPadding, flac.MaxBody)
	return c
}

// noPoints holds the place of the seek table, which is made of the new sound.
var noPoints = flac.Made(flac.SeekTable, nil)

func isSeekTable(b flac.Block) bool { return b.Type == flac.SeekTable }

func (c *flacCarrier) args() []string {
	return []string{"-metadata_header_padding", fmt.Sprint(c.room)}
}

// finish overwrites all blocks behind STREAMINFO with those of the delivery and a padding that fills the rest. Where
// they do not fit, the sound is moved back.
func (c *flacCarrier) finish(f *os.File) error {
	stat, err := f.Stat()
	if err != nil {
		return err
	}
	written, sound, err := flac.Blocks(f)
	if err != nil {
		return err
	}
	info, err := flac.ReadInfo(written)
	if err != nil {
		return err
	}
	table, err := flac.MakeSeekTable(f, sound, stat.Size(), info)
	if err != nil {
		return err
	}
	blocks := slices.Clone(c.blocks)
	blocks[slices.IndexFunc(blocks, isSeekTable)] = flac.Made(flac.SeekTable, table)
	padding := sound - flac.First - flac.Size(blocks) - 4
	if padding < 0 {
		if err := moveBack(f, sound, stat.Size(), flacPadding-padding); err != nil {
			return err
		}
		padding = flacPadding
	}
	blocks = append(blocks, flac.Block{Type: flac.Padding, Body: io.NewSectionReader(zeros{}, 0, padding)})
	w := bufio.NewWriter(io.NewOffsetWriter(f, flac.First))
	if err := flac.Write(w, blocks, true); err != nil {
		return err
	}
	return w.Flush()
}

// zeros is as many zeros as are asked for.
type zeros struct{}

func (zeros) ReadAt(b []byte, _ int64) (int, error) {
	clear(b)
	return len(b), nil
}

// moveBack moves the bytes of a file from one place to its end so many bytes towards the end.
func moveBack(f *os.File, from, end, by int64) error {
	buf := make([]byte, 1<<20)
	for end > from {
		b := buf[:min(int64(len(buf)), end-from)]
		end -= int64(len(b))
		if _, err := f.ReadAt(b, end); err != nil {
			return err
		}
		if _, err := f.WriteAt(b, end+by); err != nil {
			return err
		}
	}
	return nil
}
