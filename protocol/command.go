package protocol

// Command is what may be sent to a balance. Every command goes out as ESC, its
// characters, CR and LF, which every make in the manuals accepts.
type Command string

// The commands that are safe to send unasked. Those that start an adjustment, a
// self-test or a motor are left out on purpose, and so is Z, which adjusts on one
// make and zeroes on another.
const (
	Print    Command = "P"   // one line; with auto print on it toggles the stream
	Tare     Command = "T"   // tare; on some makes tare and zero combined
	Model    Command = "x1_" // asks for the model
	Serial   Command = "x2_" // asks for the serial number
	Firmware Command = "x3_" // asks for the software version
)

// XON is sent once after opening a line with software handshake.
const XON = 0x11

// Bytes gives what goes over the line.
func (c Command) Bytes() []byte { return append(append([]byte{0x1B}, c...), '\r', '\n') }
