package tags

import "io"

// ReadAt returns up to n bytes at an offset; fewer, or none, where the file ends.
func ReadAt(r io.ReaderAt, offset int64, n int) ([]byte, error) {
	b := make([]byte, n)
	n, err := r.ReadAt(b, offset)
	if err == io.EOF {
		err = nil
	}
	return b[:n], err
}
