package main

import (
	"errors"
	"fmt"
	"regexp"
	"strings"

	"github.com/alecthomas/kong"
)

// plainWords puts the parser's errors into words of people who run the program.
var plainWords = []struct {
	from *regexp.Regexp
	to   string
}{
	{regexp.MustCompile(`^missing flags: (.*)$`), "give $1"},
	{regexp.MustCompile(`^expected "(<.*)"$`), "give $1"},
	{regexp.MustCompile(`^expected one of (.*)$`), "give one of $1"},
	{regexp.MustCompile(`expected string value but got "EOL" \(<EOL>\)`), "the value is missing"},
	{regexp.MustCompile(`expected (int|uint|float|string) value but got (".*") \(short flag\); perhaps try .*$`), "$2 is not allowed"},
	{regexp.MustCompile(`expected a valid 64 bit int but got (".*")$`), "want a whole number, not $1"},
	{regexp.MustCompile(`expected a float but got (".*").*$`), "want a number, not $1"},
}

// parseProblem says what is wrong with a command line, and whose help to read.
func parseProblem(err error, parser *kong.Kong) error {
	node := parser.Model.Node
	var pe *kong.ParseError
	if errors.As(err, &pe) && pe.Context != nil {
		for _, p := range pe.Context.Path {
			if n := p.Node(); n != nil {
				node = n
			}
		}
	}
	text := err.Error()
	for _, w := range plainWords {
		text = w.from.ReplaceAllString(text, w.to)
	}
	if what, ok := strings.CutPrefix(text, "unexpected argument "); ok && node == parser.Model.Node {
		text = "there is no command " + what
	}
	return fmt.Errorf("%s; see %s --help", text, node.FullPath())
}
