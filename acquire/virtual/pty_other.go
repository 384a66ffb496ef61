//go:build !linux

package virtual

import "errors"

// PTY needs the pseudo-terminals of Linux; elsewhere serve the balance over TCP.
type PTY struct{ Path string }

var errNoPTY = errors.New("a virtual serial port needs Linux; serve the balance over TCP instead")

// OpenPTY gives an error here.
func OpenPTY() (*PTY, error) { return nil, errNoPTY }

func (*PTY) Read([]byte) (int, error)  { return 0, errNoPTY }
func (*PTY) Write([]byte) (int, error) { return 0, errNoPTY }
func (*PTY) Unlock() error             { return errNoPTY }
func (*PTY) Flush() error              { return errNoPTY }
func (*PTY) Close() error              { return nil }
