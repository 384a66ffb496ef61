package main

import (
	"os"
	"testing"
)

// asProgram makes the test binary behave as the program itself, so that tests can
// start it, kill it and start it again.
const asProgram = "TENTHMARK_TEST_AS_PROGRAM"

func TestMain(m *testing.M) {
	if os.Getenv(asProgram) != "" {
		os.Exit(tenthmark(os.Args[1:], stdio{os.Stdin, os.Stdout, os.Stderr}))
	}
	os.Exit(m.Run())
}
