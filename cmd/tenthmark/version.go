package main

import (
	"context"
	"fmt"
	"runtime"
	"runtime/debug"
)

// release is the version's name; the build information adds the commit.
const release = "0.1.0"

// version names the program as records and certificates do.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return release
	}
	for _, s := range info.Settings {
		if s.Key == "vcs.revision" && len(s.Value) >= 12 {
			return release + "+" + s.Value[:12]
		}
	}
	return release
}

func runVersion(_ context.Context, args []string, io stdio) int {
	if len(args) > 0 {
		fmt.Fprintln(io.err, "tenthmark version takes no arguments.")
		return exitUsage
	}
	fmt.Fprintf(io.out, "tenthmark %s %s/%s %s\n", version(), runtime.GOOS, runtime.GOARCH, runtime.Version())
	return exitDone
}
