package pipeline

import (
	"errors"
	"fmt"
	"strings"

	"duskline/internal/shards"
)

// InputError says that the inputs or the run folder cannot be used as asked:
// the command has to be changed. Each problem is one sentence.
type InputError struct{ Problems []string }

// Error gives one line a problem.
func (e *InputError) Error() string { return strings.Join(e.Problems, "\n") }

func inputError(format string, args ...any) error {
	return &InputError{[]string{fmt.Sprintf(format, args...)}}
}

// MismatchError says that a run folder belongs to a run with other inputs,
// settings or program version than those asked for now.
type MismatchError struct {
	Out         string
	Differences []string // one clause each
	Program     bool     // one of them is the program
}

// Error names the differences and the ways out.
func (e *MismatchError) Error() string {
	if e.Program {
		return fmt.Sprintf("%s holds a run of another program: %s. To finish that run, use the program that began it; "+
			"to repeat it with this one, duskline run --like %s --out NEW.", e.Out, strings.Join(e.Differences, "; "), e.Out)
	}
	return fmt.Sprintf("%s holds a run that was planned differently: %s. "+
		"To finish that run as planned, give --out %s without any PATH or settings; to process what you asked for, give a new --out.",
		e.Out, strings.Join(e.Differences, "; "), e.Out)
}

// ErrDamaged is wrapped by errors about a file of the run folder that is not
// as it was written.
var ErrDamaged = errors.New("damaged")

// MissingError says which blocks of a run are not there, or not as they were
// written.
type MissingError struct {
	Out    string
	Blocks []int // in order
	Of     int   // blocks of the run
}

// blocksTold bounds how many blocks a message names.
const blocksTold = 20

// Error names the first blocks and the ways out.
func (e *MissingError) Error() string {
	what, list := "block", shards.Ranges(e.Blocks[:min(len(e.Blocks), blocksTold)], ", ")
	if len(e.Blocks) > 1 {
		what = "blocks"
	}
	if more := len(e.Blocks) - blocksTold; more > 0 {
		list += fmt.Sprintf(" and %d more", more)
	}
	return fmt.Sprintf("%d of the %d blocks of %s are missing: %s %s. "+
		"Do them with duskline run --out %s, or write catalogs without them with duskline gather --accept-missing %s.",
		len(e.Blocks), e.Of, e.Out, what, list, e.Out, e.Out)
}
