package sheet

import (
	"io"
	"os"
	"path/filepath"
)

// disk is where a sheet is written. The only real one is a folder; tests put
// one in its place that is full, or that dies between two bytes.
type disk interface {
	// create makes a new file for appending. It fails if the name is taken.
	create(name string) (diskFile, error)
	// syncNames makes the names of the files made so far last.
	syncNames() error
}

type diskFile interface {
	io.WriteCloser
	Sync() error
}

type folder string

func (f folder) create(name string) (diskFile, error) {
	return os.OpenFile(filepath.Join(string(f), name), os.O_WRONLY|os.O_CREATE|os.O_EXCL|os.O_APPEND, 0o644)
}

// syncNames is best effort: not every system lets a folder be synced, and the
// files themselves have been by then.
func (f folder) syncNames() error {
	d, err := os.Open(string(f))
	if err != nil {
		return err
	}
	_ = d.Sync()
	return d.Close()
}
