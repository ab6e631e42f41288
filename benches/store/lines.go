package store

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"errors"
	"fmt"
	"io"
	"unicode/utf8"
)

// maxLineBytes is far beyond any row of a record; a longer one is no text file.
const maxLineBytes = 1 << 20

// lineReader gives the lines of a text file: without their ends, without a
// byte order mark, unpacked where the file is gzip.
type lineReader struct {
	r    *bufio.Reader
	long []byte // a line that did not fit the buffer
	n    int    // number of the last line, from 1
}

var (
	utf8Mark   = []byte("\xef\xbb\xbf")
	gzipMagic  = []byte{0x1f, 0x8b}
	utf16Marks = [][]byte{{0xff, 0xfe}, {0xfe, 0xff}}
)

func newLineReader(in io.Reader) (*lineReader, error) {
	r := bufio.NewReaderSize(in, 1<<18)
	if head, _ := r.Peek(2); bytes.Equal(head, gzipMagic) {
		z, err := gzip.NewReader(r)
		if err != nil {
			return nil, fmt.Errorf("the gzip file is damaged: %w", err)
		}
		r = bufio.NewReaderSize(z, 1<<18)
	}
	head, _ := r.Peek(3)
	for _, mark := range utf16Marks {
		if bytes.HasPrefix(head, mark) {
			return nil, errors.New("the text is UTF-16; save it as UTF-8")
		}
	}
	if bytes.Equal(head, utf8Mark) {
		r.Discard(len(utf8Mark))
	}
	return &lineReader{r: r}, nil
}

// next returns the next line, valid until the call after, or io.EOF.
func (l *lineReader) next() ([]byte, error) {
	b, err := l.r.ReadSlice('\n')
	if err == bufio.ErrBufferFull {
		l.long = append(l.long[:0], b...)
		for err == bufio.ErrBufferFull && len(l.long) <= maxLineBytes {
			b, err = l.r.ReadSlice('\n')
			l.long = append(l.long, b...)
		}
		if b = l.long; len(b) > maxLineBytes {
			return nil, fmt.Errorf("line %d is longer than %d bytes", l.n+1, maxLineBytes)
		}
	}
	switch {
	case err == io.EOF && len(b) == 0:
		return nil, io.EOF
	case err != nil && err != io.EOF:
		return nil, fmt.Errorf("line %d: %w", l.n+1, err)
	}
	l.n++
	return bytes.TrimRight(b, "\r\n"), nil
}

// skippable tells whether a line is blank or a comment.
func skippable(line []byte) bool {
	line = bytes.TrimLeft(line, " \t")
	return len(line) == 0 || line[0] == '#' || line[0] == '%'
}

// split is cut where a bad quote does not matter.
func split(line []byte, delimiter byte, into [][]byte) [][]byte {
	into, _ = cut(line, delimiter, into)
	return into
}

// cut cuts a line into fields, which share its memory: trimmed, and freed of
// quotes. A quoted field may hold the delimiter and doubled quotes, but no line
// end; whole is false where a quote is left open or text follows its end.
func cut(line []byte, delimiter byte, into [][]byte) (fields [][]byte, whole bool) {
	into, whole = into[:0], true
	if bytes.IndexByte(line, '"') < 0 {
		for {
			i := bytes.IndexByte(line, delimiter)
			if i < 0 {
				return append(into, trim(line)), whole
			}
			into = append(into, trim(line[:i]))
			line = line[i+1:]
		}
	}
	for {
		field := bytes.TrimLeft(line, " ")
		if len(field) == 0 || field[0] != '"' {
			i := bytes.IndexByte(line, delimiter)
			if i < 0 {
				return append(into, trim(line)), whole
			}
			into, line = append(into, trim(line[:i])), line[i+1:]
			continue
		}
		field = field[1:]
		end := 0
		doubled := false
		for end < len(field) && (field[end] != '"' || end+1 < len(field) && field[end+1] == '"') {
			if field[end] == '"' {
				doubled = true
				end++
			}
			end++
		}
		value := field[:min(end, len(field))]
		if doubled {
			value = bytes.ReplaceAll(value, []byte(`""`), []byte(`"`))
		}
		into = append(into, trim(value))
		rest := field[min(end, len(field)):]
		i := bytes.IndexByte(rest, delimiter)
		after := rest
		if i >= 0 {
			after = rest[:i]
		}
		// What is left of a well-formed field is its closing quote.
		whole = whole && len(after) > 0 && len(trim(after[1:])) == 0
		if i < 0 {
			return into, whole
		}
		line = rest[i+1:]
	}
}

// trim drops the spaces around a field, tabs among them.
func trim(b []byte) []byte {
	for len(b) > 0 && (b[0] == ' ' || b[0] == '\t') {
		b = b[1:]
	}
	for len(b) > 0 && (b[len(b)-1] == ' ' || b[len(b)-1] == '\t') {
		b = b[:len(b)-1]
	}
	return b
}

// text makes a string of a heading. What is not UTF-8 is read as Latin-1,
// where many instruments' degree sign comes from.
func text(b []byte) string {
	if utf8.Valid(b) {
		return string(b)
	}
	r := make([]rune, len(b))
	for i, c := range b {
		r[i] = rune(c)
	}
	return string(r)
}
