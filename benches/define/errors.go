package define

import (
	"errors"
	"fmt"
	"slices"
	"strings"
)

// Error is one thing wrong with a definition.
type Error struct {
	File    string
	Line    int    // from 1; 0: nowhere in particular, e.g. a key that is missing
	Column  int    // in bytes, from 1
	Key     string // e.g. "leg[2].pulse_s"; indices count from 0
	Found   string
	Allowed string
	Cause   error // in place of Found and Allowed: another file is at fault
}

// Error implements error.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", e.Line, max(e.Column, 1))
	}
	b.WriteString(": ")
	if e.Key != "" {
		b.WriteString(e.Key + ": ")
	}
	if e.Cause != nil {
		b.WriteString(e.Cause.Error())
	} else {
		fmt.Fprintf(&b, "found %s, allowed is %s", e.Found, e.Allowed)
	}
	return b.String()
}

// Unwrap returns the cause, if another file is at fault.
func (e *Error) Unwrap() error { return e.Cause }

// Errors is all that is wrong with a definition, two things or more, in the
// order of the file.
type Errors []*Error

// maxTold is how many errors a message holds; a spoilt table has hundreds.
const maxTold = 10

// Error implements error, with a line for each of the first ten.
func (e Errors) Error() string {
	var b strings.Builder
	for i, x := range e {
		if i == maxTold {
			fmt.Fprintf(&b, "\nand %d more", len(e)-maxTold)
			break
		}
		if i > 0 {
			b.WriteByte('\n')
		}
		b.WriteString(x.Error())
	}
	return b.String()
}

// Unwrap returns the errors one by one.
func (e Errors) Unwrap() []error {
	out := make([]error, len(e))
	for i, x := range e {
		out[i] = x
	}
	return out
}

// fail notes that the value at key is not allowed.
func (d *document) fail(key, found, allowed string) {
	d.errs = append(d.errs, &Error{File: d.file, Key: key, Found: found, Allowed: allowed})
}

// blame notes that the file which key names is at fault.
func (d *document) blame(key string, cause error) {
	d.errs = append(d.errs, &Error{File: d.file, Key: key, Cause: cause})
}

// err returns nil, the one error there is as an *Error, or Errors.
func (d *document) err() error {
	if len(d.errs) == 0 {
		return nil
	}
	at := locate(d.text) // only now: a good file is not walked twice
	for _, e := range d.errs {
		p := at.nearest(e.Key)
		e.Line, e.Column = p.line, p.column
	}
	slices.SortStableFunc(d.errs, func(a, b *Error) int {
		if a.Line != b.Line {
			return a.Line - b.Line
		}
		return a.Column - b.Column
	})
	if len(d.errs) == 1 {
		return d.errs[0]
	}
	return Errors(d.errs)
}

// keyed is an error of a package that owns a value: it names the key.
type keyed interface {
	error
	KeyPath() string
}

// owned gives an owner's error the file and line of its key.
func (d *document) owned(err error) error {
	if err == nil {
		return nil
	}
	var k keyed
	if !errors.As(err, &k) {
		return fmt.Errorf("%s: %w", d.file, err)
	}
	key, text := k.KeyPath(), k.Error()
	if _, rest, ok := strings.Cut(text, key+": "); ok {
		text = rest
	}
	found, allowed, ok := strings.Cut(strings.TrimPrefix(text, "found "), ", allowed is ")
	if _, written := locate(d.text)[key]; !written && slices.Contains([]string{"0", `""`, "NaN"}, found) {
		found = "nothing" // the value is only what stands for none
	}
	if ok {
		d.fail(key, found, allowed)
	} else {
		d.blame(key, errors.New(text))
	}
	return d.err()
}

// At gives err, of a package that owns what text defines, the file, line and
// column of the key it names (by a method KeyPath). It is for checks that come
// after reading, e.g. of a limit's metric; an error that names no key gets the
// file alone.
func At(file string, text []byte, err error) error {
	d := &document{file: file, text: []byte(strings.TrimPrefix(string(text), byteOrderMark))}
	return d.owned(err)
}
