package line

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

func listDevices() ([]Device, error) { return scanSysfs("/") }

// scanSysfs reads what the kernel knows about its serial ports under root, which is
// "/" but for tests. Nothing is opened: the serial library's own list opens every
// built-in port and thereby resets it.
func scanSysfs(root string) ([]Device, error) {
	class := filepath.Join(root, "sys/class/tty")
	entries, err := os.ReadDir(class)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	stable := stablePaths(root)
	var found []Device
	for _, e := range entries {
		folder, err := filepath.EvalSymlinks(filepath.Join(class, e.Name(), "device"))
		if err != nil || !isPort(filepath.Join(class, e.Name())) {
			continue // virtual consoles and pseudo-terminals have no device
		}
		d := Device{Path: filepath.Join(root, "dev", e.Name()), Stable: stable[e.Name()]}
		d.readUSB(folder, filepath.Join(root, "sys"))
		found = append(found, d)
	}
	return found, nil
}

// isPort: the four classical port names exist without hardware behind them, and then
// the kernel gives them the type 0.
func isPort(folder string) bool {
	kind := readAttribute(folder, "type")
	return kind != "0"
}

// readUSB climbs from the port's device to the USB device that carries the numbers.
func (d *Device) readUSB(folder, top string) {
	for len(folder) > len(top) {
		if vendor := readAttribute(folder, "idVendor"); vendor != "" {
			d.VendorID = strings.ToUpper(vendor)
			d.ProductID = strings.ToUpper(readAttribute(folder, "idProduct"))
			d.SerialNumber = readAttribute(folder, "serial")
			d.Manufacturer = readAttribute(folder, "manufacturer")
			d.Product = readAttribute(folder, "product")
			return
		}
		folder = filepath.Dir(folder)
	}
}

func readAttribute(folder, name string) string {
	b, err := os.ReadFile(filepath.Join(folder, name))
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(b))
}

// stablePaths maps a port's name to its link under /dev/serial/by-id.
func stablePaths(root string) map[string]string {
	paths := map[string]string{}
	links, err := filepath.Glob(filepath.Join(root, "dev/serial/by-id/*"))
	if err != nil {
		return paths
	}
	for _, link := range links {
		if target, err := os.Readlink(link); err == nil {
			paths[filepath.Base(target)] = link
		}
	}
	return paths
}
