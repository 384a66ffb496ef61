//go:build !linux && !windows

package line

import "go.bug.st/serial"

// listDevices lists names only: the USB numbers need the system's own C library here.
func listDevices() ([]Device, error) {
	names, err := serial.GetPortsList()
	if err != nil {
		return nil, err
	}
	found := make([]Device, len(names))
	for i, name := range names {
		found[i] = Device{Path: name}
	}
	return found, nil
}
