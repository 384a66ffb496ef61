package virtual

// parser cuts the input into commands: ESC, a capital letter or other sign, or a
// small letter with digits up to an underscore. CR and LF are optional.
type parser struct {
	inside  bool
	command []byte
}

const longestCommand = 13

// feed takes one byte and gives a command when it is complete.
func (p *parser) feed(c byte) string {
	c &= 0x7F
	switch {
	case c == 0x1B:
		p.inside, p.command = true, p.command[:0]
		return ""
	case !p.inside:
		return ""
	case c == '\r' || c == '\n' || len(p.command) >= longestCommand:
		p.inside = false
		return ""
	}
	p.command = append(p.command, c)
	first := p.command[0]
	if small := first >= 'a' && first <= 'z'; small && c != '_' {
		return ""
	}
	p.inside = false
	return string(p.command)
}

// Command takes bytes that came over the line; what they cause is sent by the next
// Step.
func (b *Balance) Command(p []byte) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, c := range p {
		if command := b.input.feed(c); command != "" {
			b.obey(command)
		}
	}
}

// filters are the factors on the lag for very stable to very unstable surroundings.
var filters = map[string]float64{"K": 0.6, "L": 1, "M": 1.8, "N": 3}

// obey does a command; an unknown one is swallowed without a word.
func (b *Balance) obey(command string) {
	switch command {
	case "P", "kP_":
		b.print()
	case "T", "kT_":
		b.wantT = tareOrZero
	case "U", "f4_":
		b.wantT = tareOnly
	case "V", "f3_", "kZE_":
		b.wantT = zeroOnly
	case "K", "L", "M", "N":
		b.cell.filterLag = filters[command]
	case "Z":
		b.out = append(b.out, b.report()...)
	case "x1_":
		b.reply(b.opt.Model)
	case "x2_":
		b.reply(b.opt.Serial)
	case "x3_":
		b.reply(b.opt.Firmware)
	}
}

func (b *Balance) reply(text string) {
	if !b.opt.Dialect.Silent {
		b.out = append(append(b.out, text...), '\r', '\n')
	}
}
