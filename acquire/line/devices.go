package line

import (
	"fmt"
	"io/fs"
	"slices"

	"tenthmark/session"
)

// Device is a serial port of this computer.
type Device struct {
	Path         string // "/dev/ttyUSB0"
	Stable       string // a path that stays the same after replugging, "" if there is none
	VendorID     string // of a USB adapter, four hexadecimal digits, upper case
	ProductID    string
	SerialNumber string
	Manufacturer string
	Product      string
}

// USB gives what the configuration's usb key takes, "" for a port that is no USB
// adapter.
func (d Device) USB() string {
	if d.VendorID == "" {
		return ""
	}
	id := d.VendorID + ":" + d.ProductID
	if d.SerialNumber != "" {
		id += ":" + d.SerialNumber
	}
	return id
}

// List lists the serial ports of this computer without opening one, where the system
// allows that: opening a port to look at it changes its settings.
func List() ([]Device, error) { return listDevices() }

// findUSB finds the path of the one adapter with these numbers.
func findUSB(text string) (string, error) {
	id, err := parseUSB(text)
	if err != nil {
		return "", err
	}
	all, err := List()
	if err != nil {
		return "", fmt.Errorf("usb %s: %w", text, err)
	}
	return choose(text, id, all)
}

func choose(text string, id usbID, all []Device) (string, error) {
	matching := slices.DeleteFunc(slices.Clone(all), func(d Device) bool { return !id.matches(d) })
	switch len(matching) {
	case 0:
		return "", fmt.Errorf("usb %s: %w", text, fs.ErrNotExist)
	case 1:
		return matching[0].Path, nil
	}
	return "", &session.Fault{
		Code:    CodeAmbiguous,
		Message: fmt.Sprintf("%d adapters match usb %s.", len(matching), text),
		Hint:    "Add the serial number (VENDOR:PRODUCT:SERIAL), or name the port by a path under /dev/serial/by-path.",
	}
}
