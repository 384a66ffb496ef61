package protocol

// Command is what may be sent to a balance. Every command goes out as ESC, its
// characters, CR and LF, which every make in the manuals accepts; the underscore that
// ends the longer ones is part of them. No acknowledgement is described: what a
// command did shows in the lines that follow.
//
// Left out on purpose, because they move a motor, start an adjustment or a self-test,
// lock the keys, or mean different things on different makes: Z (adjusts on most, zeroes
// on one), W, S, O and R, ? and @, f1_, x0_, s9_.
type Command string

// Commands to weigh with.
const (
	Print        Command = "P"   // one line; with auto print on it toggles the stream, so never send it to a balance that prints by itself
	Tare         Command = "T"   // tare; on some makes tare and zero combined
	TareOnly     Command = "U"   // tare and no zero; newer makes
	ZeroOnly     Command = "V"   // zero and no tare; newer makes
	ZeroLoad     Command = "f3_" // zero, on makes without V
	TareLoad     Command = "f4_" // tare without zero, on makes without U
	CancelAction Command = "s3_" // the cancel key: stop what you are doing
)

// Commands that set the filter to how quiet the place is. The balance keeps the
// setting and does not report it.
const (
	PlaceVeryStable   Command = "K"
	PlaceStable       Command = "L"
	PlaceUnstable     Command = "M"
	PlaceVeryUnstable Command = "N"
)

// Commands that ask who the balance is. Replies have no form of their own: announce
// them with Decoder.Expect. Many balances do not answer.
const (
	Model           Command = "x1_"
	Serial          Command = "x2_" // of the weigh cell
	Firmware        Command = "x3_" // software version of the weigh cell
	DisplayFirmware Command = "x4_" // software version of the display
	BalanceID       Command = "x5_" // what the laboratory calls it
)

// XON is sent once after opening a line with software handshake.
const XON = xon

const esc = 0x1B

// Bytes gives what goes over the line.
func (c Command) Bytes() []byte { return c.Append(nil) }

// Append appends what goes over the line.
func (c Command) Append(dst []byte) []byte {
	return append(append(append(dst, esc), c...), '\r', '\n')
}
