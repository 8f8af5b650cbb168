// Package fitsout writes FITS files in one pass, with bounded memory and
// repeatable bytes: headers, images and binary tables, each HDU with its
// checksum.
//
// It follows the FITS Standard, version 4.0 (Pence, Chiappetti, Page, Shaw &
// Stobie 2010, A&A 524, A42 for version 3.0; IAU FITS Working Group 2018 for
// 4.0):
//
//   - section 4.1, 4.2: keyword records, fixed-format values, long strings by
//     CONTINUE (4.2.1.2);
//   - section 4.4.1: order of the mandatory keywords;
//   - section 4.4.2.7 and appendix J: DATASUM and CHECKSUM;
//   - section 7.1: image extension; section 7.3: binary table;
//   - section 3.3.2: data are padded to 2880 bytes with zeros.
//
// No date is ever written, neither in a keyword nor in a comment, so that the
// same input gives the same bytes.
//
// A file is made of calls in order on one Writer: Empty or WriteImage for the
// primary HDU, then any number of WriteImage and Table. A Writer that has met
// an error refuses everything after it, and the file must be discarded.
package fitsout
