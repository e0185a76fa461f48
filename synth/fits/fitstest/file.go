package fitstest

import (
	"bytes"
	"strconv"
	"strings"
)

// File makes a FITS file of its cards, a line each. An empty line ends a header; a line
// @N adds N bytes of zeros up to a whole block, @N! as many and no more.
func File(cards string) []byte {
	var b []byte
	pad := func(with string) {
		for len(b)%2880 != 0 {
			b = append(b, with...)
		}
	}
	end := func() {
		b = append(b, "END"+strings.Repeat(" ", 77)...)
		pad(" ")
	}
	open := false
	for line := range strings.Lines(cards) {
		line = strings.TrimSuffix(line, "\n")
		if count, ok := strings.CutPrefix(line, "@"); ok {
			count, short := strings.CutSuffix(count, "!")
			n, err := strconv.Atoi(count)
			if err != nil {
				panic("fitstest: " + line)
			}
			if b = append(b, bytes.Repeat([]byte{0}, n)...); !short {
				pad("\x00")
			}
			continue
		}
		if line == "" {
			end()
			open = false
			continue
		}
		open = true
		b = append(b, (line + strings.Repeat(" ", 80))[:80]...)
	}
	if open {
		pad(" ")
	}
	return b
}
