package fits

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

const (
	blockSize = 2880
	cardSize  = 80
)

// A Card is one keyword of a header. Value is a string, bool, int, int64 or
// float64; it is nil for a keyword without a value. COMMENT, HISTORY and the
// blank keyword hold their text in Value; longer text is split over cards.
type Card struct {
	Key     string
	Value   any
	Comment string
}

// A Header is a list of cards in file order, without the structural ones
// (SIMPLE, BITPIX, NAXIS, TFORM1, EXTNAME, CHECKSUM, ...) when writing.
type Header []Card

// Get returns the first card of that keyword.
func (h Header) Get(key string) (Card, bool) {
	for _, c := range h {
		if c.Key == key {
			return c, true
		}
	}
	return Card{}, false
}

// Set replaces the first card of that keyword, or appends one. COMMENT,
// HISTORY and the blank keyword are always appended.
func (h *Header) Set(key string, value any, comment string) {
	if !commentary(key) {
		for i := range *h {
			if (*h)[i].Key == key {
				(*h)[i] = Card{key, value, comment}
				return
			}
		}
	}
	*h = append(*h, Card{key, value, comment})
}

// Float returns the number of a card; ok is false if it is missing or no number.
func (h Header) Float(key string) (v float64, ok bool) {
	c, _ := h.Get(key)
	switch v := c.Value.(type) {
	case float64:
		return v, true
	case int:
		return float64(v), true
	case int64:
		return float64(v), true
	}
	return 0, false
}

// Int returns the integer of a card; ok is false if it is missing or no integer.
func (h Header) Int(key string) (v int, ok bool) {
	c, _ := h.Get(key)
	switch v := c.Value.(type) {
	case int:
		return v, true
	case int64:
		return int(v), true
	case float64:
		if v == math.Trunc(v) && math.Abs(v) < 1<<53 {
			return int(v), true
		}
	}
	return 0, false
}

// Text returns the string of a card; ok is false if it is missing or no string.
func (h Header) Text(key string) (v string, ok bool) {
	c, _ := h.Get(key)
	v, ok = c.Value.(string)
	return v, ok
}

func commentary(key string) bool { return key == "COMMENT" || key == "HISTORY" || key == "" }

// structural reports the keywords that the writer sets by itself.
func structural(key string) bool {
	switch key {
	case "SIMPLE", "XTENSION", "BITPIX", "PCOUNT", "GCOUNT", "GROUPS", "EXTEND", "EXTNAME", "TFIELDS", "THEAP",
		"END", "CONTINUE", "HIERARCH", "LONGSTRN", "CHECKSUM", "DATASUM", "BSCALE", "BZERO", "BLANK":
		return true
	}
	stem := strings.TrimRight(key, "0123456789")
	switch stem {
	case "NAXIS":
		return true
	case "TTYPE", "TFORM", "TUNIT", "TBCOL", "TSCAL", "TZERO", "TNULL", "TDIM", "TDISP":
		return stem != key
	}
	return false
}

// check makes a header ready for either encoder: it refuses what the standard
// (or a careless reader) would choke on, adds LONGSTRN where a string needs
// CONTINUE cards, and moves a comment that does not fit into a COMMENT card.
func (h Header) check() (Header, error) {
	seen := map[string]bool{}
	out := make(Header, 0, len(h)+1)
	needs := false
	for _, c := range h {
		if structural(c.Key) {
			return nil, fmt.Errorf("header keyword %s is set by the writer, leave it out", c.Key)
		}
		if commentary(c.Key) {
			text, ok := c.Value.(string)
			if !ok || c.Comment != "" {
				return nil, fmt.Errorf("header keyword %q: its text must be a string in Value", c.Key)
			}
			if err := printable(c.Key, text); err != nil {
				return nil, err
			}
			for len(text) > 72 {
				out = append(out, Card{c.Key, text[:72], ""})
				text = text[72:]
			}
			out = append(out, Card{c.Key, text, ""})
			continue
		}
		if !validKey(c.Key) {
			return nil, fmt.Errorf("header keyword %q: must be 1 to 8 of A-Z, 0-9, '-' and '_'", c.Key)
		}
		if seen[c.Key] {
			return nil, fmt.Errorf("header keyword %s: given twice", c.Key)
		}
		seen[c.Key] = true
		if err := printable(c.Key, c.Comment); err != nil {
			return nil, err
		}
		switch v := c.Value.(type) {
		case string:
			if err := printable(c.Key, v); err != nil {
				return nil, err
			}
		case float64:
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, fmt.Errorf("header keyword %s: %v cannot be written to a header, leave it out", c.Key, v)
			}
		case bool, int, int64:
		default:
			return nil, fmt.Errorf("header keyword %s: cannot write a %T", c.Key, c.Value)
		}
		v := value(c.Value)
		isLong := long(v)
		needs = needs || isLong
		if comment := c.Comment; comment != "" && (isLong || 10+max(20, len(v))+3+len(comment) > cardSize) {
			c.Comment = ""
			out = append(out, c)
			for text := c.Key + ": " + comment; text != ""; {
				n := min(72, len(text))
				out = append(out, Card{"COMMENT", text[:n], ""})
				text = text[n:]
			}
			continue
		}
		out = append(out, c)
	}
	if needs {
		out = append(Header{{"LONGSTRN", "OGIP 1.0", "long strings use CONTINUE"}}, out...)
	}
	return out, nil
}

// long reports whether a formatted value goes over into CONTINUE cards.
// Numbers never do: the longest float has 24 characters.
func long(value string) bool { return len(value) >= cardSize-10 }

func validKey(key string) bool {
	if len(key) < 1 || len(key) > 8 {
		return false
	}
	for _, c := range []byte(key) {
		if !(c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '-' || c == '_') {
			return false
		}
	}
	return true
}

func printable(key, text string) error {
	for i := range len(text) {
		if text[i] < ' ' || text[i] > '~' {
			return fmt.Errorf("header keyword %q: %q holds a character outside printable ASCII", key, text)
		}
	}
	return nil
}

// value formats a checked value in free format; strings are quoted.
func value(v any) string {
	switch v := v.(type) {
	case string:
		return fmt.Sprintf("'%-8s'", strings.ReplaceAll(v, "'", "''"))
	case bool:
		if v {
			return "T"
		}
		return "F"
	case float64:
		s := strconv.FormatFloat(v, 'G', -1, 64)
		if strings.Contains(s, ".") {
			return s
		}
		if i := strings.IndexByte(s, 'E'); i >= 0 {
			return s[:i] + ".0" + s[i:]
		}
		return s + ".0"
	}
	return fmt.Sprint(v)
}

// encode appends the card, checked before, as one line or more of 80 bytes.
func (c Card) encode(b []byte) []byte {
	if commentary(c.Key) {
		return fmt.Appendf(b, "%-8s%-72s", c.Key, c.Value)
	}
	text := value(c.Value)
	if !long(text) {
		if _, ok := c.Value.(string); ok {
			text = fmt.Sprintf("%-20s", text)
		} else {
			text = fmt.Sprintf("%20s", text)
		}
		if c.Comment != "" {
			text += " / " + c.Comment
		}
		return fmt.Appendf(b, "%-8s= %-70s", c.Key, text)
	}
	// The body is cut into pieces of 67 characters, quotes and the ampersand
	// make 70, never between the two halves of a doubled quote.
	body := strings.ReplaceAll(c.Value.(string), "'", "''")
	head := fmt.Sprintf("%-8s= ", c.Key)
	for body != "" {
		n := min(67, len(body))
		if n < len(body) && strings.Count(body[:n], "'")%2 == 1 {
			n--
		}
		amp := "&"
		if n == len(body) {
			amp = ""
		}
		b = fmt.Appendf(b, "%s%-70s", head, "'"+body[:n]+amp+"'")
		body, head = body[n:], "CONTINUE  "
	}
	return b
}

// encode returns the header block: the cards, END, blanks up to a full block.
func (h Header) encode() []byte {
	var b []byte
	for _, c := range h {
		b = c.encode(b)
	}
	b = fmt.Appendf(b, "%-80s", "END")
	for len(b)%blockSize != 0 {
		b = append(b, ' ')
	}
	return b
}

// parseCard reads one line of 80 bytes. What cannot be understood has a nil
// Value; nothing in a foreign header is an error by itself.
func parseCard(line []byte) Card {
	key := strings.TrimRight(string(line[:8]), " ")
	rest := string(line[8:])
	if key == "CONTINUE" {
		text, _, _ := quoted(strings.TrimLeft(rest, " "))
		return Card{key, text, ""}
	}
	if commentary(key) || !strings.HasPrefix(rest, "= ") {
		return Card{key, strings.TrimRight(rest, " "), ""}
	}
	rest = strings.TrimLeft(rest[2:], " ")
	if strings.HasPrefix(rest, "'") {
		text, tail, ok := quoted(rest)
		if !ok {
			return Card{Key: key}
		}
		_, comment, _ := strings.Cut(tail, "/")
		return Card{key, text, strings.TrimSpace(comment)}
	}
	text, comment, _ := strings.Cut(rest, "/")
	return Card{key, number(strings.TrimSpace(text)), strings.TrimSpace(comment)}
}

// quoted reads a quoted string at the start of s, without trailing blanks.
func quoted(s string) (text, tail string, ok bool) {
	if !strings.HasPrefix(s, "'") {
		return "", s, false
	}
	var b strings.Builder
	for i := 1; i < len(s); i++ {
		if s[i] == '\'' {
			if i+1 == len(s) || s[i+1] != '\'' {
				return strings.TrimRight(b.String(), " "), s[i+1:], true
			}
			i++
		}
		b.WriteByte(s[i])
	}
	return "", "", false
}

func number(s string) any {
	switch {
	case s == "T":
		return true
	case s == "F":
		return false
	case s == "" || !strings.ContainsRune("+-.0123456789", rune(s[0])):
		return nil
	}
	if i, err := strconv.ParseInt(s, 10, 0); err == nil {
		return int(i)
	}
	v, err := strconv.ParseFloat(strings.NewReplacer("D", "E", "d", "e").Replace(s), 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return v
}
