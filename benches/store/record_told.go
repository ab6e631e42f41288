package store

import (
	"fmt"
	"strings"
)

// count tells what a person should know of the rows that were read.
func (a *assembler) count() {
	var gaps []string
	for r, n := range a.missing {
		if n > 0 {
			gaps = append(gaps, fmt.Sprintf("%s in %s", roleNames[r], rows(n)))
		}
	}
	if gaps != nil {
		a.told.Lines = append(a.told.Lines, "no value: "+strings.Join(gaps, ", "))
	}
	if a.repeats > 0 {
		a.told.Lines = append(a.told.Lines, "time repeats that of the row before in "+rows(a.repeats))
	}
	if a.passed > 0 {
		a.told.Lines = append(a.told.Lines, fmt.Sprintf("blank and comment lines between the rows, passed over: %d", a.passed))
	}
}

func rows(n int) string {
	if n == 1 {
		return "1 row"
	}
	return fmt.Sprintf("%d rows", n)
}
