package main

import (
	"context"
	"fmt"

	"tenthmark/acquire/line"
)

func runDevices(_ context.Context, args []string, io stdio) int {
	f := newFlags("devices", "Lists the serial lines of this computer, with what the configuration can call them.", io.err)
	if code, done := parse(f, args); done {
		return code
	}
	devices, err := line.List()
	if err != nil {
		return complain(io.err, err)
	}
	if len(devices) == 0 {
		fmt.Fprintln(io.out, "There is no serial line. Plug the balance's cable or adapter in, or use a serial device server with tcp = \"host:port\".")
		return exitDone
	}
	for _, d := range devices {
		fmt.Fprintf(io.out, "%s\n", d.Path)
		for _, more := range []struct{ what, text string }{
			{"adapter", d.Manufacturer + " " + d.Product}, {`port = "…"`, d.Stable}, {`usb = "…"`, d.USB()},
		} {
			if more.text != "" && more.text != " " {
				fmt.Fprintf(io.out, "    %-12s %s\n", more.what, more.text)
			}
		}
	}
	return exitDone
}
