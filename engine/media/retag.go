package media

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// retaggers write a file of a container anew with other gain tags; every byte of its sound stays. Each room of tags
// that has one is entered here.
var retaggers = map[string]func(dst io.Writer, src *io.SectionReader, g tags.Gains) error{
	"mp3": id3.Retag, "aac": id3.Retag,
}

// Retag writes a copy of the recording at source to path in which its gain tags are those given, instead of
// whatever it had. Nothing else of it changes. What is at path is overwritten. Errors name the file and wrap
// ErrUnsupported if its format has no gain tags.
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
		return about(source, fmt.Errorf("%w: there are no gain tags in %s", ErrUnsupported, k.container))
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
