package level

import (
	"errors"
	"io"
	"os"
)

// aside keeps a finished file while another is made under its name. It has no name meanwhile, so that nothing is left of
// it, whatever happens.
type aside struct{ f *os.File }

// put takes the file at a path, in place of what was there before.
func (a *aside) put(path string) error {
	a.close()
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	a.f = f
	return os.Remove(path)
}

// restore writes it over the file at a path.
func (a *aside) restore(path string) error {
	if _, err := a.f.Seek(0, io.SeekStart); err != nil {
		return err
	}
	return copyInto(path, a.f)
}

func (a *aside) close() {
	if a.f != nil {
		a.f.Close()
		a.f = nil
	}
}

// copyInto makes a file of what there is to read, and brings it to the disk.
func copyInto(path string, from io.Reader) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	_, err = io.Copy(f, from)
	return errors.Join(err, f.Sync(), f.Close())
}
