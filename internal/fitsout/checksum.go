package fitsout

import "encoding/binary"

// checksum is the 32-bit ones' complement sum of big-endian words (FITS
// Standard 4.0, appendix J). The order of the words does not matter.
type checksum uint32

// add returns the sum with the words of p, whose length is a multiple of 4,
// added.
func (c checksum) add(p []byte) checksum {
	// A block of 2^32 words would be needed to overflow 64 bits.
	sum := uint64(c)
	for ; len(p) >= 4; p = p[4:] {
		sum += uint64(binary.BigEndian.Uint32(p))
	}
	return fold(sum)
}

func (c checksum) plus(d checksum) checksum { return fold(uint64(c) + uint64(d)) }

// fold brings carries back to the low end, twice since the first fold can
// carry again.
func fold(sum uint64) checksum {
	sum = sum&0xffffffff + sum>>32
	sum = sum&0xffffffff + sum>>32
	return checksum(sum)
}

// encode gives the 16 characters that make an HDU whose sum is c, taken with
// sixteen '0' in their place, add up to minus zero: the complement of c, each
// byte as four letters or digits (appendix J.2), rotated right by one because
// the string starts at column 12, one byte past a word.
func (c checksum) encode() string {
	var text [16]byte
	value := ^uint32(c)
	for i := range 4 {
		b := byte(value >> (24 - 8*i))
		var part [4]byte
		for j := range part {
			part[j] = b/4 + '0'
		}
		part[0] += b % 4
		// Moving a pair in opposite directions keeps the sum while it leaves
		// the punctuation between digits and letters.
		for moved := true; moved; {
			moved = false
			for j := 0; j < 4; j += 2 {
				if punctuation(part[j]) || punctuation(part[j+1]) {
					part[j]++
					part[j+1]--
					moved = true
				}
			}
		}
		for j, p := range part {
			text[(4*j+i+1)%16] = p
		}
	}
	return string(text[:])
}

func punctuation(b byte) bool { return b > '9' && b < 'A' || b > 'Z' && b < 'a' }
