package session

import "errors"

// Fault is an error for the person at the bench: what happened, in their words,
// and what to do next. Code is stable and meant for programs; it is lower case
// with hyphens. Err, when there is one, is the cause for the log.
type Fault struct {
	Code    string
	Message string
	Hint    string
	Err     error
}

// Error gives code and message and the cause.
func (f *Fault) Error() string {
	text := f.Code + ": " + f.Message
	if f.Err != nil {
		text += ": " + f.Err.Error()
	}
	return text
}

// Unwrap gives the cause.
func (f *Fault) Unwrap() error { return f.Err }

// Refuse makes a Fault without a cause: the call was understood and is refused.
func Refuse(code, message, hint string) *Fault {
	return &Fault{Code: code, Message: message, Hint: hint}
}

// FaultCode gives the code of the first Fault in err's chain, "" when there is none.
func FaultCode(err error) string {
	var f *Fault
	if errors.As(err, &f) {
		return f.Code
	}
	return ""
}
