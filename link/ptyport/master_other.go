//go:build !unix

package ptyport

// Master is the board's side of a pseudo-terminal. There are none here.
type Master struct{}

// Open returns ErrNoPTY.
func Open() (*Master, string, error) { return nil, "", ErrNoPTY }

// SetLossy does nothing.
func (*Master) SetLossy(bool) {}

// Lost returns 0.
func (*Master) Lost() uint64 { return 0 }

// Path returns "".
func (*Master) Path() string { return "" }

// Read returns ErrNoPTY.
func (*Master) Read([]byte) (int, error) { return 0, ErrNoPTY }

// Write returns ErrNoPTY.
func (*Master) Write([]byte) (int, error) { return 0, ErrNoPTY }

// Close does nothing.
func (*Master) Close() error { return nil }
