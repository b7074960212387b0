package record

import (
	"errors"
	"fmt"
)

// Code names the reason why a record is refused. Codes are part of the format.
type Code string

// The codes, in the order in which FORMAT.md explains them.
const (
	CodeJSON        Code = "E_JSON"
	CodeHeader      Code = "E_HEADER"
	CodeVersion     Code = "E_VERSION"
	CodeConvention  Code = "E_CONVENTION"
	CodeEnsemble    Code = "E_ENSEMBLE"
	CodeLength      Code = "E_LENGTH"
	CodeBits        Code = "E_BITS"
	CodeNumber      Code = "E_NUMBER"
	CodePairing     Code = "E_PAIRING"
	CodeOrthogonal  Code = "E_ORTHOGONAL"
	CodeCommute     Code = "E_COMMUTE"
	CodeRank        Code = "E_RANK"
	CodeRREF        Code = "E_RREF"
	CodeSymmetric   Code = "E_SYMMETRIC"
	CodeDuplicate   Code = "E_DUPLICATE"
	CodeCount       Code = "E_COUNT"
	CodeTruncated   Code = "E_TRUNCATED"
	CodeChecksum    Code = "E_CHECKSUM"
	CodeUnsupported Code = "E_UNSUPPORTED"
)

// Error is the refusal of a record.
type Error struct {
	Code Code
	// File is the name that the reader was given.
	File string
	// Line is the one-based line of a text record, 0 in a packed one.
	Line int64
	// Offset is the position in bytes of the entry in a packed record.
	Offset int64
	// Text says what was found and what was expected.
	Text string
}

// Error gives one line that begins with the code.
func (e *Error) Error() string {
	if e.Line > 0 {
		return fmt.Sprintf("%s: %s:%d: %s", e.Code, e.File, e.Line, e.Text)
	}
	return fmt.Sprintf("%s: %s: byte %d: %s", e.Code, e.File, e.Offset, e.Text)
}

// CodeOf returns the code of a refusal anywhere in err's chain, or "".
func CodeOf(err error) Code {
	var e *Error
	if errors.As(err, &e) {
		return e.Code
	}
	return ""
}

// refusef is an Error without its place; the reader that meets it fills that in.
func refusef(code Code, format string, args ...any) *Error {
	return &Error{Code: code, Text: fmt.Sprintf(format, args...)}
}
