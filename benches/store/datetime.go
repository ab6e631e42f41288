package store

import (
	"fmt"
	"strconv"
	"strings"
	"time"
)

// clockReader reads wall-clock times and time spans as seconds. Wall clocks
// without a zone are read as if in one without summer time: an hour that is
// put back is backward time, which the reader of a record refuses.
type clockReader struct {
	layout   string // the one that worked last
	dayFirst bool   // of dates with slashes: 24/3/2017, not 3/24/2017
}

// dateLayouts are tried in this order; fractions of a second are read by all.
var dateLayouts = []string{
	time.RFC3339, "2006-01-02T15:04:05", "2006-01-02 15:04:05Z07:00", "2006-01-02 15:04:05", "2006-01-02 15:04",
	"2006/1/2 15:04:05", "2006/1/2 15:04",
	"1/2/2006 3:04:05 PM", "1/2/2006 3:04 PM", "1/2/2006 15:04:05", "1/2/2006 15:04",
	"2.1.2006 15:04:05", "2.1.2006 15:04", "02-Jan-2006 15:04:05", "2 Jan 2006 15:04:05",
}

// look decides from a sample of fields whether dates with slashes begin with the day,
// and tells whether the sample leaves it open.
func (c *clockReader) look(sample []string) (open bool) {
	for _, s := range sample {
		a, rest, ok := strings.Cut(s, "/")
		if !ok || len(a) > 2 {
			continue
		}
		b, _, _ := strings.Cut(rest, "/")
		x, errX := strconv.Atoi(a)
		y, errY := strconv.Atoi(b)
		switch {
		case errX != nil || errY != nil:
		case x > 12:
			c.dayFirst = true
			return false
		case y > 12:
			return false
		default:
			open = true
		}
	}
	return open
}

// date returns a wall clock as nanoseconds from the year 1970.
func (c *clockReader) date(s string) (time.Time, error) {
	if t, err := time.Parse(c.layout, s); c.layout != "" && err == nil {
		return t, nil
	}
	for _, layout := range dateLayouts {
		if c.dayFirst {
			layout = strings.Replace(layout, "1/2/2006", "2/1/2006", 1)
		}
		if t, err := time.Parse(layout, s); err == nil {
			c.layout = layout
			return t, nil
		}
	}
	return time.Time{}, fmt.Errorf("%q is no date and time that is known here, such as 2017-03-24 13:05:06.7 or 3/24/2017 1:05:06 PM", s)
}

// span returns [d ]h:m:s[.f] or m:s in seconds.
func span(s string) (float64, error) {
	bad := fmt.Errorf("%q is no time such as 12:34:56.7", s)
	days := 0.0
	if d, rest, ok := strings.Cut(s, " "); ok {
		n, err := strconv.ParseUint(strings.TrimSuffix(d, "d"), 10, 32)
		if err != nil {
			return 0, bad
		}
		days, s = float64(n), strings.TrimSpace(rest)
	}
	parts := strings.Split(s, ":")
	if len(parts) < 2 || len(parts) > 4 {
		return 0, bad
	}
	if len(parts) == 4 { // d:h:m:s
		n, err := strconv.ParseUint(parts[0], 10, 32)
		if err != nil || days != 0 {
			return 0, bad
		}
		days, parts = float64(n), parts[1:]
	}
	total := 0.0
	for i, p := range parts {
		x, ok := parsePlain([]byte(p), false)
		if !ok || x < 0 || i > 0 && x >= 60 || i < len(parts)-1 && strings.Contains(p, ".") {
			return 0, bad
		}
		total = total*60 + x
	}
	return days*86400 + total, nil
}
