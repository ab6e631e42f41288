package store

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// Parquet footers and page headers are structures in Thrift's compact
// protocol (https://github.com/apache/thrift/blob/master/doc/specs/thrift-compact-protocol.md).
// A decoder makes room for a list or text before it reads it, so one flipped
// bit in a length can ask for more memory than there is, which no program
// survives. skim walks the bytes first and refuses any length that what
// remains cannot hold.

var errThrift = errors.New("damaged structure")

// maxThriftDepth is far beyond the nesting of any Parquet structure.
const maxThriftDepth = 32

// skim returns how many bytes of b the structure at its start takes;
// io.ErrUnexpectedEOF when it goes on beyond b.
func skim(b []byte) (int, error) {
	s := skimmer{b: b}
	err := s.structure(0)
	return s.at, err
}

type skimmer struct {
	b  []byte
	at int
}

func (s *skimmer) byte() (byte, error) {
	if s.at >= len(s.b) {
		return 0, io.ErrUnexpectedEOF
	}
	s.at++
	return s.b[s.at-1], nil
}

func (s *skimmer) varint() (uint64, error) {
	v, n := binary.Uvarint(s.b[s.at:])
	if n == 0 {
		return 0, io.ErrUnexpectedEOF
	}
	if n < 0 {
		return 0, fmt.Errorf("%w: a number too long", errThrift)
	}
	s.at += n
	return v, nil
}

func (s *skimmer) skip(n uint64) error {
	if n > uint64(len(s.b)-s.at) {
		return io.ErrUnexpectedEOF
	}
	s.at += int(n)
	return nil
}

func (s *skimmer) structure(depth int) error {
	if depth > maxThriftDepth {
		return fmt.Errorf("%w: nested too deep", errThrift)
	}
	for {
		head, err := s.byte()
		if err != nil || head == 0 {
			return err
		}
		if head>>4 == 0 { // the field's number follows in full
			if _, err := s.varint(); err != nil {
				return err
			}
		}
		// The types 1 and 2 are the two truth values: a field has no more bytes.
		if kind := head & 0x0f; kind > 2 {
			if err := s.value(kind, depth); err != nil {
				return err
			}
		}
	}
}

func (s *skimmer) value(kind byte, depth int) error {
	switch kind {
	case 1, 2, 3: // a truth value in a list, a byte
		return s.skip(1)
	case 4, 5, 6: // 16, 32 and 64 bit numbers
		_, err := s.varint()
		return err
	case 7: // double
		return s.skip(8)
	case 8: // text
		n, err := s.varint()
		if err != nil {
			return err
		}
		return s.skip(n)
	case 9, 10: // list, set
		head, err := s.byte()
		if err != nil {
			return err
		}
		n := uint64(head >> 4)
		if n == 15 {
			if n, err = s.varint(); err != nil {
				return err
			}
		}
		if n > uint64(len(s.b)-s.at) { // each element takes a byte at least
			return io.ErrUnexpectedEOF
		}
		for range n {
			if err := s.value(head&0x0f, depth+1); err != nil {
				return err
			}
		}
		return nil
	case 12:
		return s.structure(depth + 1)
	}
	return fmt.Errorf("%w: type %d", errThrift, kind)
}
