package fitsread

import (
	"math"
	"strconv"
	"strings"
)

const (
	blockLen = 2880
	cardLen  = 80
)

// card is one header record: its keyword and what follows, unparsed, since most
// cards of most files are never asked for.
type card struct {
	key  string // upper case; words joined by blanks for HIERARCH
	rest string // after the value indicator, or the text of a comment card
	long string // joined text where CONTINUE cards follow
}

// header is the list of cards of one HDU in file order. Where a keyword stands
// twice, the first counts.
type header []card

// parseHeader splits header blocks up to END into cards.
func parseHeader(text string) header {
	h := make(header, 0, len(text)/cardLen)
	for len(text) >= cardLen {
		line := text[:cardLen]
		text = text[cardLen:]
		key := strings.TrimRight(line[:8], " ")
		switch {
		case key == "END" && strings.TrimRight(line, " ") == "END":
			return h
		case key == "CONTINUE" && len(h) > 0:
			h[len(h)-1].extend(line[8:])
		case key == "HIERARCH":
			if name, value, ok := strings.Cut(line[8:], "="); ok {
				h = append(h, card{key: strings.ToUpper(strings.Join(strings.Fields(name), " ")), rest: value})
			}
		case line[8] == '=' && key != "COMMENT" && key != "HISTORY":
			h = append(h, card{key: strings.ToUpper(strings.TrimSpace(key)), rest: line[9:]})
		default:
			h = append(h, card{key: strings.ToUpper(key), rest: line[8:]})
		}
	}
	return h
}

// extend appends a CONTINUE card to a string value that ends with "&".
func (c *card) extend(rest string) {
	have := c.long
	if have == "" {
		text, _, ok := quoted(c.rest)
		if !ok {
			return
		}
		have = text
	}
	if more, _, ok := quoted(rest); ok && strings.HasSuffix(have, "&") {
		c.long = have[:len(have)-1] + more
	}
}

// quoted reads a FITS string: in single quotes, doubled quotes inside, trailing
// blanks not significant. It returns what follows the closing quote.
func quoted(s string) (text, after string, ok bool) {
	s = strings.TrimLeft(s, " ")
	if s == "" || s[0] != '\'' {
		return "", s, false
	}
	s = s[1:]
	end := strings.IndexByte(s, '\'')
	if end >= 0 && (end+1 == len(s) || s[end+1] != '\'') {
		return strings.TrimRight(s[:end], " "), s[end+1:], true // no doubled quote inside
	}
	var b strings.Builder
	for i := 0; i < len(s); i++ {
		if s[i] == '\'' {
			if i+1 == len(s) || s[i+1] != '\'' {
				return strings.TrimRight(b.String(), " "), s[i+1:], true
			}
			i++
		}
		b.WriteByte(s[i])
	}
	return strings.TrimRight(b.String(), " "), "", true
}

// value returns the value as text: the content of a string or the bare token.
func (c card) value() string {
	if c.long != "" {
		return c.long
	}
	if text, _, ok := quoted(c.rest); ok {
		return text
	}
	token, _, _ := strings.Cut(c.rest, "/")
	return strings.TrimSpace(token)
}

// isString reports whether the value is a quoted string.
func (c card) isString() bool {
	_, _, ok := quoted(c.rest)
	return ok
}

// comment returns the text after the slash.
func (c card) comment() string {
	rest := c.rest
	if _, after, ok := quoted(rest); ok {
		rest = after
	}
	_, comment, _ := strings.Cut(rest, "/")
	return strings.TrimSpace(comment)
}

func (h header) find(key string) (card, bool) {
	for i := range h {
		if h[i].key == key {
			return h[i], true
		}
	}
	return card{}, false
}

// text returns the value of key, "" when it is missing.
func (h header) text(key string) string {
	c, ok := h.find(key)
	if !ok {
		return ""
	}
	return c.value()
}

// number returns a finite value of key; numbers in quotes count.
func (h header) number(key string) (float64, bool) {
	c, ok := h.find(key)
	if !ok {
		return 0, false
	}
	return parseNumber(c.value())
}

// logical returns the truth value of key: T or F, or words people write for it.
func (h header) logical(key string) (value, ok bool) {
	c, found := h.find(key)
	if !found {
		return false, false
	}
	switch strings.ToUpper(c.value()) {
	case "T", "TRUE", "YES":
		return true, true
	case "F", "FALSE", "NO":
		return false, true
	}
	return false, false
}

// integer returns a whole number of key.
func (h header) integer(key string) (int64, bool) {
	c, ok := h.find(key)
	if !ok {
		return 0, false
	}
	n, err := strconv.ParseInt(c.value(), 10, 64)
	return n, err == nil
}

// parseNumber reads a number as FITS writes it, D exponents included. NaN and
// infinities are no numbers.
func parseNumber(s string) (float64, bool) {
	s = strings.TrimSpace(s)
	if s == "" || !strings.ContainsRune("+-.0123456789", rune(s[0])) {
		return 0, false
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		v, err = strconv.ParseFloat(strings.NewReplacer("D", "E", "d", "e").Replace(s), 64)
	}
	return v, err == nil && !math.IsInf(v, 0) && !math.IsNaN(v)
}

// split separates a keyword into its stem and its trailing number, 0 if none.
func split(key string) (stem string, n int) {
	i := len(key)
	for i > 0 && key[i-1] >= '0' && key[i-1] <= '9' {
		i--
	}
	if i == len(key) || len(key)-i > 4 {
		return key, 0
	}
	n, _ = strconv.Atoi(key[i:])
	return key[:i], n
}
