package line

import (
	"fmt"
	"net"
	"slices"
	"strconv"
	"strings"
)

var parities = []string{"none", "odd", "even", "mark", "space"}

var flows = []string{"none", "xonxoff", "rtscts"}

func (s Spec) withDefaults() Spec {
	if s.Baud == 0 {
		s.Baud = 9600
	}
	if s.DataBits == 0 {
		s.DataBits = 8
	}
	if s.StopBits == 0 {
		s.StopBits = 1
	}
	if s.Parity == "" {
		s.Parity = "none"
	}
	if s.Flow == "" {
		s.Flow = "none"
	}
	if s.Pace == 0 {
		s.Pace = 1
	}
	return s
}

// Check says what is wrong with the spec, in the words of the configuration.
func (s Spec) Check() error {
	s = s.withDefaults()
	named := 0
	for _, text := range []string{s.Port, s.USB, s.TCP, s.Replay} {
		if text != "" {
			named++
		}
	}
	switch {
	case named != 1:
		return fmt.Errorf("exactly one of port, usb, tcp and replay names the line, not %d", named)
	case s.Baud < 50 || s.Baud > 4_000_000:
		return fmt.Errorf("baud = %d is no rate of a serial line", s.Baud)
	case s.DataBits != 7 && s.DataBits != 8:
		return fmt.Errorf("data_bits = %d: use 7 or 8", s.DataBits)
	case s.StopBits != 1 && s.StopBits != 2:
		return fmt.Errorf("stop_bits = %d: use 1 or 2", s.StopBits)
	case !slices.Contains(parities, s.Parity):
		return fmt.Errorf("parity = %q: use %s", s.Parity, strings.Join(parities, ", "))
	case !slices.Contains(flows, s.Flow):
		return fmt.Errorf("flow = %q: use %s", s.Flow, strings.Join(flows, ", "))
	case !(s.Pace > 0 && s.Pace <= 1e6):
		return fmt.Errorf("the pace %g of a replay must be positive", s.Pace)
	}
	return s.checkAddress()
}

func (s Spec) checkAddress() error {
	if s.USB != "" {
		_, err := parseUSB(s.USB)
		return err
	}
	if s.TCP != "" {
		host, port, err := net.SplitHostPort(s.TCP)
		if n, e := strconv.ParseUint(port, 10, 16); err != nil || e != nil || n == 0 || host == "" {
			return fmt.Errorf("tcp = %q: use host:port, for example 192.0.2.10:4001", s.TCP)
		}
	}
	return nil
}

// String names the line as a person would: "/dev/ttyUSB0 9600 8-N-1".
func (s Spec) String() string {
	s = s.withDefaults()
	switch {
	case s.TCP != "":
		return s.TCP
	case s.Replay != "":
		return s.Replay
	}
	name := s.Port
	if s.USB != "" {
		name = "usb " + s.USB
	}
	return fmt.Sprintf("%s %d %d-%s-%d", name, s.Baud, s.DataBits, strings.ToUpper(s.Parity[:1]), s.StopBits)
}

// usbID is what names an adapter, upper case; serial may be empty.
type usbID struct{ vendor, product, serial string }

func parseUSB(text string) (usbID, error) {
	parts := strings.SplitN(text, ":", 3)
	bad := fmt.Errorf("usb = %q: use VENDOR:PRODUCT or VENDOR:PRODUCT:SERIAL, for example 0403:6001:A1B2C3", text)
	if len(parts) < 2 {
		return usbID{}, bad
	}
	for _, hex := range parts[:2] {
		if _, err := strconv.ParseUint(hex, 16, 16); err != nil || len(hex) != 4 {
			return usbID{}, bad
		}
	}
	id := usbID{vendor: parts[0], product: parts[1]}
	if len(parts) == 3 {
		id.serial = parts[2]
	}
	return id, nil
}

func (u usbID) matches(d Device) bool {
	return strings.EqualFold(u.vendor, d.VendorID) && strings.EqualFold(u.product, d.ProductID) &&
		(u.serial == "" || strings.EqualFold(u.serial, d.SerialNumber))
}
