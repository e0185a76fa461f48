package fits

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
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

// Verify holds every HDU against its sums and returns the first mismatch.
func (f *File) Verify() error {
	for _, h := range f.HDUs {
		if err := f.VerifyHDU(h); err != nil {
			return err
		}
	}
	return nil
}

// VerifyHDU reads an HDU and holds it against its DATASUM and CHECKSUM (FITS standard 4.0,
// section 4.4.2.7), as far as it has them: an empty value, and a CHECKSUM of zeros, are not
// defined yet.
func (f *File) VerifyHDU(h *HDU) error {
	dataSum, hasData := h.Header.Text("DATASUM")
	checksum, hasCheck := h.Header.Text("CHECKSUM")
	hasData = hasData && dataSum != ""
	hasCheck = hasCheck && strings.Trim(checksum, "0") != ""
	if !hasData && !hasCheck {
		return nil
	}
	var data, all sum
	padded := (h.size + blockSize - 1) / blockSize * blockSize
	if _, err := io.Copy(&data, io.NewSectionReader(f.r, h.start, padded)); err != nil {
		return fmt.Errorf("%s: %w", f.where(h), err)
	}
	data.Write(make([]byte, 3)) // completes the last word of a file that ends without padding
	if want, err := strconv.ParseUint(strings.TrimSpace(dataSum), 10, 32); hasData && (err != nil || data.value() != uint32(want)) {
		return fmt.Errorf("%s: the data do not add up to DATASUM (%d, not %q): they are damaged, or were changed without a new sum", f.where(h), data.value(), dataSum)
	}
	if !hasCheck {
		return nil
	}
	if _, err := io.Copy(&all, io.NewSectionReader(f.r, h.head, h.start-h.head)); err != nil {
		return fmt.Errorf("%s: %w", f.where(h), err)
	}
	// All of an HDU adds up to minus zero; plus zero would be zeros throughout.
	if total := fold(all.acc + data.acc); total != math.MaxUint32 {
		return fmt.Errorf("%s: the HDU does not add up to CHECKSUM: its header is damaged, or was changed without a new sum", f.where(h))
	}
	return nil
}
