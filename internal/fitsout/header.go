package fitsout

import (
	"errors"
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
)

const (
	cardSize  = 80
	blockSize = 2880
	// maxString is the room between the quotes of one keyword record.
	maxString = 68
	// fixedEnd is where the value of a fixed-format number ends, counted from
	// the "= " of the record (columns 11 to 30).
	fixedEnd = 20
)

// ErrHeader is wrapped by every error about a keyword or its value.
var ErrHeader = errors.New("FITS header")

var (
	keyForm = regexp.MustCompile(`^[A-Z0-9_-]{1,8}$`)
	// ownKeys are written by this package from the structure of the HDU.
	ownKeys = regexp.MustCompile(`^(SIMPLE|XTENSION|BITPIX|NAXIS\d*|EXTEND|PCOUNT|GCOUNT|TFIELDS|THEAP|GROUPS|` +
		`EXTNAME|DATASUM|CHECKSUM|END|LONGSTRN|CONTINUE|COMMENT|HISTORY|(TTYPE|TFORM|TUNIT|TDISP|TNULL|TDIM|TUCD|TUTYP|TCOMM)\d+)$`)
)

// Header collects the keyword records that a caller adds to an HDU, in order.
// Problems are kept and returned when the HDU is begun. The zero value is an
// empty header; a nil *Header is accepted by every function of this package.
type Header struct {
	cards []string
	keys  map[string]bool
	errs  []error
}

// Text adds a string. It must be printable ASCII (see ASCII); one that does
// not fit a record is carried on by CONTINUE. Trailing blanks are not
// significant in FITS. The comment is cut to the room that is left.
func (h *Header) Text(key, value, comment string) {
	if h.accept(key, comment) && h.printable(key, value) {
		h.cards = append(h.cards, textCards(key, value, comment)...)
	}
}

// Int adds an integer.
func (h *Header) Int(key string, value int64, comment string) {
	if h.accept(key, comment) {
		h.cards = append(h.cards, fixedCard(key, strconv.FormatInt(value, 10), comment))
	}
}

// Float adds a number with the fewest digits that give it back exactly. FITS
// has no header form for NaN and infinity: they are errors.
func (h *Header) Float(key string, value float64, comment string) {
	if !h.accept(key, comment) {
		return
	}
	if math.IsNaN(value) || math.IsInf(value, 0) {
		h.fail("%s: a header cannot hold %g; leave the keyword out", key, value)
		return
	}
	h.cards = append(h.cards, fixedCard(key, floatText(value), comment))
}

// Bool adds a logical value.
func (h *Header) Bool(key string, value bool, comment string) {
	if h.accept(key, comment) {
		h.cards = append(h.cards, fixedCard(key, boolText(value), comment))
	}
}

// Comment adds COMMENT records, the text broken between words.
func (h *Header) Comment(text string) { h.prose("COMMENT", text) }

// History adds HISTORY records, the text broken between words.
func (h *Header) History(text string) { h.prose("HISTORY", text) }

func (h *Header) prose(key, text string) {
	if !h.printable(key, text) {
		return
	}
	for _, line := range wrap(text, cardSize-8) {
		h.cards = append(h.cards, pad(fmt.Sprintf("%-8s%s", key, line)))
	}
}

func (h *Header) accept(key, comment string) bool {
	switch {
	case !keyForm.MatchString(key):
		h.fail("%q is not a keyword: want 1 to 8 of A-Z 0-9 _ -", key)
	case ownKeys.MatchString(key):
		h.fail("%s is written from the structure of the HDU and cannot be set", key)
	case h.keys[key]:
		h.fail("%s is set twice", key)
	default:
		if h.keys == nil {
			h.keys = map[string]bool{}
		}
		h.keys[key] = true
		return h.printable(key, comment)
	}
	return false
}

func (h *Header) printable(key, s string) bool {
	if i := badByte(s); i >= 0 {
		h.fail("%s: byte %#02x at position %d of %q is not printable ASCII", key, s[i], i, s)
		return false
	}
	return true
}

func (h *Header) fail(format string, args ...any) {
	h.errs = append(h.errs, fmt.Errorf("%w: "+format, append([]any{ErrHeader}, args...)...))
}

func (h *Header) err() error {
	if h == nil {
		return nil
	}
	return errors.Join(h.errs...)
}

func (h *Header) records() []string {
	if h == nil {
		return nil
	}
	return h.cards
}

// ASCII returns s with everything that FITS text cannot hold written as a
// backslash escape: \u00e9 for a character outside printable ASCII, \xff for
// a byte that is no character. A final blank, which FITS readers drop, becomes
// \x20. Text that FITS can hold comes back unchanged.
func ASCII(s string) string {
	if badByte(s) < 0 && !strings.HasSuffix(s, " ") {
		return s
	}
	quoted := strconv.QuoteToASCII(s)
	quoted = quoted[1 : len(quoted)-1]
	// QuoteToASCII also escapes the two characters below, which FITS can hold.
	var b strings.Builder
	for i := 0; i < len(quoted); i++ {
		if quoted[i] == '\\' {
			i++
			if quoted[i] != '\\' && quoted[i] != '"' {
				b.WriteByte('\\')
			}
		}
		b.WriteByte(quoted[i])
	}
	if out, cut := strings.CutSuffix(b.String(), " "); cut {
		return out + `\x20`
	}
	return b.String()
}

// badByte returns the position of the first byte that is not printable ASCII
// (section 4.2.1), or -1.
func badByte(s string) int {
	for i := 0; i < len(s); i++ {
		if s[i] < ' ' || s[i] > '~' {
			return i
		}
	}
	return -1
}

func boolText(v bool) string {
	if v {
		return "T"
	}
	return "F"
}

func floatText(v float64) string {
	s := strconv.FormatFloat(v, 'G', -1, 64)
	if !strings.ContainsAny(s, ".E") {
		s += ".0"
	}
	return s
}

// fixedCard puts a number or logical value right-aligned to column 30.
func fixedCard(key, value, comment string) string {
	return withComment(fmt.Sprintf("%-8s= %*s", key, fixedEnd, value), comment)
}

// textCards gives one record, or several joined by CONTINUE.
func textCards(key, value, comment string) []string {
	quoted := strings.ReplaceAll(value, "'", "''")
	if len(quoted) <= maxString {
		return []string{withComment(fmt.Sprintf("%-8s= %-*s", key, fixedEnd, fmt.Sprintf("'%-8s'", quoted)), comment)}
	}
	var cards []string
	lead := fmt.Sprintf("%-8s= ", key)
	for len(quoted) > maxString {
		cut := maxString - 1
		// A doubled quote must not be torn apart.
		if tail := quoted[:cut]; (len(tail)-len(strings.TrimRight(tail, "'")))%2 == 1 {
			cut--
		}
		cards = append(cards, pad(lead+"'"+quoted[:cut]+"&'"))
		quoted, lead = quoted[cut:], "CONTINUE  "
	}
	return append(cards, withComment(lead+"'"+quoted+"'", comment))
}

func withComment(card, comment string) string {
	if comment != "" && len(card)+4 <= cardSize {
		card += " / " + comment
	}
	if len(card) > cardSize {
		card = card[:cardSize]
	}
	return pad(card)
}

func pad(card string) string { return card + strings.Repeat(" ", cardSize-len(card)) }

// wrap breaks text into lines of at most width bytes, between words where
// there is a choice.
func wrap(text string, width int) []string {
	var lines []string
	for len(text) > width {
		cut := strings.LastIndexByte(text[:width+1], ' ')
		if cut <= 0 {
			cut = width
		}
		lines = append(lines, text[:cut])
		text = strings.TrimPrefix(text[cut:], " ")
	}
	return append(lines, text)
}
