package fits

import (
	"encoding/binary"
	"fmt"
	"io"
	"strconv"
)

// A sum is the ones'-complement sum of 32-bit big-endian words of the FITS
// checksum convention (FITS standard 4.0, appendix J).
type sum struct {
	acc  uint64
	part [4]byte
	n    int // bytes in part
}

// Write adds p; it never fails.
func (s *sum) Write(p []byte) (int, error) {
	size := len(p)
	if s.n > 0 {
		k := copy(s.part[s.n:], p)
		s.n += k
		p = p[k:]
		if s.n < 4 {
			return size, nil
		}
		s.acc += uint64(binary.BigEndian.Uint32(s.part[:]))
		s.n = 0
	}
	for len(p) >= 8 {
		// Folded at the end of every piece: 2^30 words cannot overflow.
		q := p[:min(len(p), 1<<30)&^7]
		p = p[len(q):]
		a := uint64(0)
		for i := 0; i+8 <= len(q); i += 8 {
			w := binary.BigEndian.Uint64(q[i : i+8])
			a += w>>32 + w&0xffffffff
		}
		s.acc = fold(s.acc + a)
	}
	if len(p) >= 4 {
		s.acc += uint64(binary.BigEndian.Uint32(p))
		p = p[4:]
	}
	s.n = copy(s.part[:], p)
	s.acc = fold(s.acc)
	return size, nil
}

func fold(a uint64) uint64 {
	for a>>32 != 0 {
		a = a>>32 + a&0xffffffff
	}
	return a
}

// value returns the sum of all whole words written so far.
func (s *sum) value() uint32 { return uint32(fold(s.acc)) }

// encodeChecksum turns the complement of a sum into the 16 letters and digits
// of CHECKSUM (FITS standard 4.0, appendix J.2).
func encodeChecksum(total uint32) string {
	v := ^total
	var asc, out [16]byte
	for i := range 4 {
		b := byte(v >> (24 - 8*i))
		var ch [4]byte
		for j := range ch {
			ch[j] = b/4 + '0'
		}
		ch[0] += b % 4
		// Pairs are moved apart, their sum kept, until no character is
		// punctuation.
		for again := true; again; {
			again = false
			for j := 0; j < 4; j += 2 {
				if punctuation(ch[j]) || punctuation(ch[j+1]) {
					ch[j]++
					ch[j+1]--
					again = true
				}
			}
		}
		for j := range ch {
			asc[4*j+i] = ch[j]
		}
	}
	for i := range asc {
		out[(i+1)%16] = asc[i]
	}
	return string(out[:])
}

func punctuation(c byte) bool { return c >= ':' && c <= '@' || c >= '[' && c <= '`' }

// Verify reads the data of every HDU and holds them against its DATASUM (FITS standard
// 4.0, section 4.4.2.7), if it has one.
func (f *File) Verify() error {
	for _, h := range f.HDUs {
		text, ok := h.Header.Text("DATASUM")
		if !ok {
			continue
		}
		var s sum
		padded := (h.size + blockSize - 1) / blockSize * blockSize
		if _, err := io.Copy(&s, io.NewSectionReader(f.r, h.start, padded)); err != nil {
			return fmt.Errorf("%s: %w", f.where(h), err)
		}
		if want, err := strconv.ParseUint(text, 10, 32); err != nil || s.value() != uint32(want) {
			return fmt.Errorf("%s: the data are damaged: their sum is %d, DATASUM says %q", f.where(h), s.value(), text)
		}
	}
	return nil
}
