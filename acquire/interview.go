package acquire

import (
	"strings"
	"time"

	"tenthmark/protocol"
	"tenthmark/session"
)

// interview is the beginning of a connection: listen first, then ask the balance for
// model, serial number and software version, each with a window of its own. Many
// balances do not answer, and that is no fault.
type interview struct {
	identity session.Identity
	unasked  int // lines that came while nothing was asked

	listening bool
	questions []protocol.Command
	asked     protocol.Command // what is being asked, "" while listening
	until     time.Time        // the end of the present window
	window    time.Duration
}

func newInterview(cfg Config, now time.Time) interview {
	iv := interview{listening: true, until: now.Add(seconds(cfg.ListenS)), window: seconds(cfg.ReplyS)}
	if *cfg.AskIdentity && cfg.Replay == "" {
		iv.questions = []protocol.Command{protocol.Model, protocol.Serial, protocol.Firmware}
	}
	return iv
}

func (iv *interview) due() time.Time { return iv.until }

// step gives the next question once the present window is over, and whether the
// interview is.
func (iv *interview) step(now time.Time) (question protocol.Command, over bool) {
	if now.Before(iv.until) {
		return "", false
	}
	iv.listening = false
	if len(iv.questions) == 0 {
		iv.until = time.Time{}
		return "", true
	}
	iv.asked, iv.questions = iv.questions[0], iv.questions[1:]
	iv.until = now.Add(iv.window)
	return iv.asked, false
}

// hear takes a line: the reply to the present question closes its window.
func (iv *interview) hear(f *protocol.Frame, now time.Time) {
	if iv.listening && f.Kind != protocol.Text {
		iv.unasked++
	}
	if iv.asked == "" {
		return
	}
	reply, ok := replyOf(f)
	if !ok {
		return
	}
	switch iv.asked {
	case protocol.Model:
		iv.identity.Model = reply
	case protocol.Serial:
		iv.identity.Serial = reply
	case protocol.Firmware:
		iv.identity.Firmware = reply
	}
	iv.asked = ""
	iv.until = now
}

// replyOf reads a reply of the x group: a text without a form of its own, perhaps
// with a label before it. A weight, a status or a line of a report is none; a bare
// number without sign, mark and unit may be a serial number in a padded line.
func replyOf(f *protocol.Frame) (string, bool) {
	text := strings.TrimSpace(clean(f.Raw))
	switch {
	case f.InReport || text == "":
		return "", false
	case f.Kind == protocol.Text:
	case f.Kind == protocol.Weight && f.Sign == 0 && f.Unit == "" && f.ID == "" && !strings.ContainsAny(text, ".,[]"):
	default:
		return "", false
	}
	if label, rest, found := strings.Cut(text, " "); found && (strings.HasSuffix(label, ".") || strings.HasSuffix(label, ":") || label == "Type" || label == "Model") {
		text = strings.TrimSpace(rest)
	}
	return text, text != ""
}

// clean strips bit 7 and whatever is no character.
func clean(raw []byte) string {
	out := make([]byte, 0, len(raw))
	for _, b := range raw {
		if b &= 0x7F; b >= 0x20 && b != 0x7F {
			out = append(out, b)
		}
	}
	return string(out)
}
