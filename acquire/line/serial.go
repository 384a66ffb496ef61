package line

import (
	"errors"
	"fmt"

	"go.bug.st/serial"
)

var parityOf = map[string]serial.Parity{
	"none": serial.NoParity, "odd": serial.OddParity, "even": serial.EvenParity, "mark": serial.MarkParity, "space": serial.SpaceParity,
}

var stopBitsOf = map[int]serial.StopBits{1: serial.OneStopBit, 2: serial.TwoStopBits}

// serialWire is an open serial port.
type serialWire struct {
	port serial.Port
	hold hold // what the system lets us do beside the library
}

// openSerial opens a serial port with the line's settings and empties its buffer.
func openSerial(path string, spec Spec) (*serialWire, error) {
	h, err := beforeOpen(path)
	if err != nil {
		return nil, err
	}
	// InitialStatusBits stays nil: a pseudo-terminal has no modem lines, and the
	// kernel raises DTR and RTS anyway.
	port, err := serial.Open(path, &serial.Mode{
		BaudRate: spec.Baud, DataBits: spec.DataBits, Parity: parityOf[spec.Parity], StopBits: stopBitsOf[spec.StopBits],
	})
	if err != nil {
		h.release()
		return nil, fmt.Errorf("open %s: %w", path, err)
	}
	w := &serialWire{port: port, hold: h}
	if err := w.prepare(spec); err != nil {
		return nil, errors.Join(fmt.Errorf("open %s: %w", path, err), w.Close())
	}
	return w, nil
}

// prepare sets what must be set before the reader starts.
func (w *serialWire) prepare(spec Spec) error {
	if err := w.hold.afterOpen(spec.Flow); err != nil {
		return err
	}
	if err := w.port.SetReadTimeout(readSlice); err != nil {
		return fmt.Errorf("read timeout: %w", err)
	}
	if err := w.port.ResetInputBuffer(); err != nil {
		return fmt.Errorf("empty the buffer: %w", err)
	}
	if spec.Flow == "xonxoff" {
		_, err := w.Write([]byte{xon})
		return err
	}
	return nil
}

// xon must be sent once when a device with software handshake is switched on.
const xon = 0x11

func (w *serialWire) Read(p []byte) (int, error) { return w.port.Read(p) }

func (w *serialWire) Write(p []byte) (int, error) { return w.hold.write(w.port, p) }

func (w *serialWire) Close() error {
	err := w.port.Close()
	w.hold.release()
	return err
}
