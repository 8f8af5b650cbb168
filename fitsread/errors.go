package fitsread

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// The kinds of failure, told apart with errors.Is.
var (
	ErrNotRegular = errors.New("not a regular file")
	ErrNotFITS    = errors.New("not a FITS file")
	ErrTruncated  = errors.New("file is cut short")
	ErrBadHeader  = errors.New("header contradicts itself or the file")
	ErrTooLarge   = errors.New("larger than the limit")
	ErrCompressed = errors.New("compressed in tiles by a method that is not read")
	ErrNoSpectrum = errors.New("no spectrum found")
	ErrLayout     = errors.New("layout does not fit the file")
	ErrBadData    = errors.New("data cannot be used")
	ErrChanged    = errors.New("changed while it was read")
	ErrInternal   = errors.New("reader failed unexpectedly")
)

// ours reports an error about what is in a file, not about the disk it is on.
func ours(err error) bool {
	for _, kind := range []error{ErrNotFITS, ErrTruncated, ErrBadHeader, ErrTooLarge, ErrCompressed, ErrNoSpectrum, ErrLayout, ErrBadData, ErrInternal} {
		if errors.Is(err, kind) {
			return true
		}
	}
	return false
}

// ReadError says which file could not be read, where in it, why, and what to do
// about it. HDU and Row count from 0 and are -1 where they do not apply.
type ReadError struct {
	File   string
	HDU    int
	Column string
	Row    int
	Msg    string // what is wrong
	Hint   string // what to do
	Err    error  // one of the Err values of this package, or of the system
}

// Error returns one sentence: where, what, and what to do.
func (e *ReadError) Error() string {
	var b strings.Builder
	b.WriteString(oneLine(e.File))
	sep := ": "
	if e.HDU >= 0 {
		fmt.Fprintf(&b, "%sHDU %d", sep, e.HDU)
		sep = ", "
	}
	if e.Column != "" {
		fmt.Fprintf(&b, "%scolumn %s", sep, e.Column)
		sep = ", "
	}
	if e.Row >= 0 {
		fmt.Fprintf(&b, "%srow %d", sep, e.Row)
	}
	b.WriteString(": ")
	b.WriteString(e.Msg)
	if e.Hint != "" {
		b.WriteString("; ")
		b.WriteString(e.Hint)
	}
	return b.String()
}

// oneLine writes the bytes of a file name that would break a line, or are no
// text, as escapes.
func oneLine(name string) string {
	clean := utf8.ValidString(name) && !strings.ContainsFunc(name, unicode.IsControl)
	if clean {
		return name
	}
	quoted := strconv.Quote(name)
	return quoted[1 : len(quoted)-1]
}

// Unwrap returns the kind of failure.
func (e *ReadError) Unwrap() error { return e.Err }

// fault is a ReadError in the making: the file's name is added at the door.
func fault(kind error, hdu int, hint, format string, args ...any) *ReadError {
	return &ReadError{HDU: hdu, Row: -1, Msg: fmt.Sprintf(format, args...), Hint: hint, Err: kind}
}

func (e *ReadError) at(column string, row int) *ReadError {
	e.Column, e.Row = column, row
	return e
}

// named gives err the file's name, wrapping foreign errors.
func named(err error, file string) error {
	if err == nil {
		return nil
	}
	var re *ReadError
	if errors.As(err, &re) {
		out := *re
		out.File = file
		return &out
	}
	return &ReadError{File: file, HDU: -1, Row: -1, Msg: err.Error(), Err: err}
}
