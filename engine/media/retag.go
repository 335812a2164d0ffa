package media

import (
	"context"
	"errors"
	"io"
	"os"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/flac"
	"evenshelf/engine/tags/id3"
	"evenshelf/engine/tags/mp4"
	"evenshelf/engine/tags/ogg"
)

type retagger func(dst io.Writer, src *io.SectionReader, g tags.Gains) error

// retaggers write a file of a container anew with other gain tags; every byte of its sound stays. Each room of tags
// that has one is entered here.
var retaggers = map[string]retagger{
	"aac":  id3.Retag,
	"flac": behindTags(flac.Retag),
	"mp3":  id3.Retag,
	"mp4":  mp4.Retag,
	"mov":  mp4.Retag,
	"ogg":  behindTags(ogg.Retag),
}

// behindTags is a retagger that leaves what taggers of other formats put in front of the file, also if there are gains
// in it: the format's own are what players go by.
func behindTags(retag retagger) retagger {
	return func(dst io.Writer, src *io.SectionReader, g tags.Gains) error {
		k, err := sniff(src)
		if err != nil {
			return err
		}
		if _, err := io.CopyN(dst, io.NewSectionReader(src, 0, k.start), k.start); err != nil {
			return err
		}
		return otherOgg(retag(dst, io.NewSectionReader(src, k.start, src.Size()-k.start), g))
	}
}

// NoGainTags is the error of Retag for a container that has no gain tags; it is an ErrUnsupported.
type NoGainTags struct{ Container string } // as in Info.Container

func (e NoGainTags) Error() string { return "there are no gain tags in " + e.Container }
func (e NoGainTags) Unwrap() error { return ErrUnsupported }

// Retag writes a copy of the recording at source to path in which its gain tags are those given, instead of
// whatever it had. Nothing else of it changes. What is at path is overwritten. Errors name the file and wrap
// NoGainTags if its format has none.
func (t *Toolbox) Retag(ctx context.Context, source, path string, g tags.Gains) (err error) {
	if err := stopped(ctx)(); err != nil {
		return about(source, err)
	}
	in, size, err := openRegular(source)
	if err != nil {
		return about(source, err)
	}
	defer in.Close()
	k, err := sniff(in)
	if err != nil {
		return about(source, err)
	}
	retag := retaggers[k.container]
	if retag == nil {
		return about(source, NoGainTags{k.container})
	}
	out, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_TRUNC, 0o644)
	if err != nil {
		return about(path, err)
	}
	err = retag(out, io.NewSectionReader(in, 0, size), g)
	if err = errors.Join(err, out.Sync(), out.Close()); err != nil {
		os.Remove(path)
		return about(source, err)
	}
	return nil
}
