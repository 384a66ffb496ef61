//go:build linux

package line

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"testing"

	"tenthmark/session"
)

// plant writes files and links of a made-up /sys and /dev.
func plant(t *testing.T, root string, files, links map[string]string) {
	t.Helper()
	for name, text := range files {
		path := filepath.Join(root, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text+"\n"), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	for name, target := range links {
		path := filepath.Join(root, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.Symlink(target, path); err != nil {
			t.Fatal(err)
		}
	}
}

func TestDevicesAreReadFromTheKernelsTree(t *testing.T) {
	root := t.TempDir()
	usb := "sys/devices/pci0/usb1/1-2/"
	plant(t, root, map[string]string{
		usb + "idVendor":                           "0403",
		usb + "idProduct":                          "6001",
		usb + "serial":                             "A10B2C",
		usb + "manufacturer":                       "Adapter Works",
		usb + "product":                            "USB Serial",
		usb + "1-2:1.0/ttyUSB0/tty/ttyUSB0/dev":    "188:0",
		"sys/devices/pci0/usb1/1-3/idVendor":       "2341",
		"sys/devices/pci0/usb1/1-3/idProduct":      "00ab",
		"sys/devices/pci0/usb1/1-3/1-3:1.0/uevent": "",
		"sys/devices/platform/serial8250/uevent":   "",
		"sys/class/tty/ttyS0/type":                 "4",
		"sys/class/tty/ttyS1/type":                 "0", // a name without hardware
		"sys/class/tty/tty1/dev":                   "4:1",
	}, map[string]string{
		"sys/class/tty/ttyUSB0/device":                                    "../../../devices/pci0/usb1/1-2/1-2:1.0/ttyUSB0",
		"sys/class/tty/ttyACM0/device":                                    "../../../devices/pci0/usb1/1-3/1-3:1.0",
		"sys/class/tty/ttyS0/device":                                      "../../../devices/platform/serial8250",
		"sys/class/tty/ttyS1/device":                                      "../../../devices/platform/serial8250",
		"dev/serial/by-id/usb-Adapter_Works_USB_Serial_A10B2C-if00-port0": "../../ttyUSB0",
	})
	found, err := scanSysfs(root)
	if err != nil {
		t.Fatal(err)
	}
	want := []Device{
		{Path: filepath.Join(root, "dev/ttyACM0"), VendorID: "2341", ProductID: "00AB"},
		{Path: filepath.Join(root, "dev/ttyS0")},
		{
			Path: filepath.Join(root, "dev/ttyUSB0"), Stable: filepath.Join(root, "dev/serial/by-id/usb-Adapter_Works_USB_Serial_A10B2C-if00-port0"),
			VendorID: "0403", ProductID: "6001", SerialNumber: "A10B2C", Manufacturer: "Adapter Works", Product: "USB Serial",
		},
	}
	if len(found) != len(want) {
		t.Fatalf("found %+v, want %+v", found, want)
	}
	for i := range want {
		if found[i] != want[i] {
			t.Errorf("device %d: %+v, want %+v", i, found[i], want[i])
		}
	}
}

func TestOneAdapterIsChosen(t *testing.T) {
	all := []Device{
		{Path: "a", VendorID: "0403", ProductID: "6001", SerialNumber: "ONE"},
		{Path: "b", VendorID: "0403", ProductID: "6001", SerialNumber: "TWO"},
		{Path: "c", VendorID: "1A86", ProductID: "7523"},
	}
	for _, tt := range []struct{ usb, path, code string }{
		{"0403:6001:two", "b", ""},
		{"1a86:7523", "c", ""},
		{"0403:6001", "", CodeAmbiguous},
		{"0403:6001:THREE", "", "absent"},
	} {
		id, err := parseUSB(tt.usb)
		if err != nil {
			t.Fatal(err)
		}
		path, err := choose(tt.usb, id, all)
		switch {
		case tt.code == "" && (err != nil || path != tt.path):
			t.Errorf("%s: %q, %v; want %q", tt.usb, path, err, tt.path)
		case tt.code == "absent" && !errors.Is(err, fs.ErrNotExist):
			t.Errorf("%s: %v, want absent", tt.usb, err)
		case tt.code == CodeAmbiguous && session.FaultCode(err) != CodeAmbiguous:
			t.Errorf("%s: %v, want %s", tt.usb, err, CodeAmbiguous)
		}
	}
}
