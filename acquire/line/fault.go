package line

import (
	"errors"
	"fmt"
	"io/fs"
	"net"
	"os"

	"go.bug.st/serial"

	"tenthmark/session"
)

// errGone marks a line that was open and went away.
var errGone = errors.New("the line went away")

// errStalled marks a line that does not take a command.
var errStalled = errors.New("the line takes no bytes")

// errNotSerial marks a path that is no serial device.
var errNotSerial = errors.New("not a character device")

// errMany marks a process that holds so many files that the serial library cannot
// wait for another one.
var errMany = errors.New("the descriptor's number is 1024 or higher")

// Codes of the faults of a line.
const (
	CodeGone      = "line-gone"
	CodeStalled   = "line-stalled"
	CodeAbsent    = "port-absent"
	CodeDenied    = "port-denied"
	CodeBusy      = "port-busy"
	CodeNotSerial = "port-not-serial"
	CodeAmbiguous = "port-ambiguous"
	CodeServer    = "server-unreachable"
	CodeMany      = "too-many-files"
	CodeRecording = "recording-unusable"
	CodeFailed    = "line-failed"
)

// fault puts the cause in the operator's words.
func fault(spec Spec, cause error) *session.Fault {
	var known *session.Fault
	if errors.As(cause, &known) {
		return known
	}
	code := classify(cause)
	f := &session.Fault{Code: code, Err: cause}
	name := spec.place()
	switch code {
	case CodeGone:
		f.Message = fmt.Sprintf("The balance line %s went away.", name)
		f.Hint = "Plug the cable or adapter in again; the station goes on by itself."
	case CodeStalled:
		f.Message = fmt.Sprintf("The balance line %s takes no commands.", name)
		f.Hint = "Check the handshake (flow) setting and the cable; the line is opened anew."
	case CodeAbsent:
		f.Message = fmt.Sprintf("The balance port %s is not there.", name)
		f.Hint = "Plug the adapter in, or see `tenthmark devices` for the ports that are there."
	case CodeDenied:
		f.Message = fmt.Sprintf("The balance port %s may not be opened by this user.", name)
		f.Hint = "Add the user to the group that owns the port (usually dialout), then sign in again."
	case CodeBusy:
		f.Message = fmt.Sprintf("The balance port %s is in use by another program.", name)
		f.Hint = "Close the other program; the station tries again by itself."
	case CodeNotSerial:
		f.Message = fmt.Sprintf("%s is not a serial port, or it refuses these line settings.", name)
		f.Hint = "Check port, baud, data_bits, parity and stop_bits; `tenthmark devices` lists the ports."
	case CodeServer:
		f.Message = fmt.Sprintf("The serial device server %s does not answer.", name)
		f.Hint = "Check its power, network and address; the station tries again by itself."
	case CodeMany:
		f.Message = fmt.Sprintf("The balance port %s cannot be opened: this program holds too many files.", name)
		f.Hint = "Restart tenthmark, and spread very many stations over several daemons."
	default:
		f.Message = fmt.Sprintf("The balance line %s cannot be used.", name)
		f.Hint = "Check the cable and the [[station]] section; the log has the cause."
	}
	return f
}

// place names where the line goes, without its settings.
func (s Spec) place() string {
	for _, name := range []string{s.Port, s.TCP, s.Replay} {
		if name != "" {
			return name
		}
	}
	return "usb " + s.USB
}

// classify finds the code for a cause.
func classify(cause error) string {
	var port *serial.PortError // its code 0 is PortBusy: only a PortError has codes
	var network net.Error
	switch {
	case errors.Is(cause, errGone):
		return CodeGone
	case errors.Is(cause, errBusy):
		return CodeBusy
	case errors.Is(cause, errStalled):
		return CodeStalled
	case errors.Is(cause, errNotSerial):
		return CodeNotSerial
	case errors.Is(cause, errMany):
		return CodeMany
	case errors.Is(cause, fs.ErrNotExist):
		return CodeAbsent
	case errors.Is(cause, fs.ErrPermission):
		return CodeDenied
	case isDeviceLost(cause):
		return CodeGone
	case errors.As(cause, &port):
		return portCode(port)
	case errors.As(cause, &network), errors.Is(cause, os.ErrDeadlineExceeded):
		return CodeServer
	}
	return CodeFailed
}

func portCode(e *serial.PortError) string {
	switch e.Code() {
	case serial.PortBusy:
		return CodeBusy
	case serial.PermissionDenied:
		return CodeDenied
	case serial.PortNotFound:
		return CodeAbsent
	case serial.PortClosed:
		return CodeGone
	case serial.InvalidSerialPort, serial.InvalidSpeed, serial.InvalidDataBits, serial.InvalidParity, serial.InvalidStopBits:
		return CodeNotSerial
	}
	return CodeFailed
}
