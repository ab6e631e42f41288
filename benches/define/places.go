package define

import (
	"fmt"
	"slices"
	"strings"

	"github.com/pelletier/go-toml/v2/unstable"
)

// place is where something stands: line and column in bytes, both from 1. The
// zero place is nowhere.
type place struct{ line, column int }

// places holds where each key, table and element of an array stands, by its
// path, e.g. "leg[1].time_s[3]".
type places map[string]place

// nearest returns the place of key, or of the nearest thing around it.
func (at places) nearest(key string) place {
	for {
		if p, ok := at[key]; ok {
			return p
		}
		cut := strings.LastIndexAny(key, ".[")
		if cut < 0 {
			return place{}
		}
		key = key[:cut]
	}
}

// locator walks a document that is known to be TOML.
type locator struct {
	at    places
	lines lines
	count map[string]int // elements of arrays of tables so far, by path
}

func locate(text []byte) places {
	l := &locator{at: places{}, lines: linesOf(text), count: map[string]int{}}
	var p unstable.Parser
	p.Reset(text)
	inside := ""
	for p.NextExpression() {
		switch e := p.Expression(); e.Kind {
		case unstable.Table, unstable.ArrayTable:
			inside = l.header(e)
		case unstable.KeyValue:
			l.pair(e, inside)
		}
	}
	return l.at
}

// maxPath is how long a path is followed, in bytes; no key of a definition
// lies so deep, and what does is put down to what is around it.
const maxPath = 1 << 10

// put notes where path stands; the first place counts.
func (l *locator) put(path string, r unstable.Range) {
	if len(path) > maxPath {
		return
	}
	if _, ok := l.at[path]; !ok {
		l.at[path] = l.lines.place(int(r.Offset))
	}
}

// header notes a [table] or [[array of tables]] and returns its path.
func (l *locator) header(e *unstable.Node) string {
	path := ""
	for it := e.Key(); it.Next() && len(path) <= maxPath; {
		key := it.Node()
		path = join(path, string(key.Data))
		l.put(path, key.Raw)
		if it.IsLast() && e.Kind == unstable.ArrayTable {
			l.count[path]++
		}
		if n := l.count[path]; n > 0 { // the newest element
			path = fmt.Sprintf("%s[%d]", path, n-1)
			l.put(path, key.Raw)
		}
	}
	return path
}

func (l *locator) pair(e *unstable.Node, inside string) {
	path := inside
	for it := e.Key(); it.Next() && len(path) <= maxPath; {
		path = join(path, string(it.Node().Data))
		l.put(path, it.Node().Raw)
	}
	l.value(e.Value(), path)
}

// value notes what lies inside v, and returns where its first part stands: an
// array has no range of its own.
func (l *locator) value(v *unstable.Node, path string) unstable.Range {
	if len(path) > maxPath {
		return v.Raw
	}
	switch v.Kind {
	case unstable.InlineTable:
		for it := v.Children(); it.Next(); {
			if n := it.Node(); n.Kind == unstable.KeyValue {
				l.pair(n, path)
			}
		}
	case unstable.Array:
		first, i := unstable.Range{}, 0
		for it := v.Children(); it.Next(); {
			n := it.Node()
			if n.Kind == unstable.Comment {
				continue
			}
			at := fmt.Sprintf("%s[%d]", path, i)
			r := l.value(n, at)
			if r.Length > 0 {
				l.put(at, r)
			}
			if i == 0 {
				first = r
			}
			i++
		}
		return first
	}
	return v.Raw
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// lines holds where each line begins.
type lines []int

func linesOf(text []byte) lines {
	starts := lines{0}
	for i, c := range text {
		if c == '\n' {
			starts = append(starts, i+1)
		}
	}
	return starts
}

func (l lines) place(offset int) place {
	line, found := slices.BinarySearch(l, offset)
	if !found {
		line--
	}
	return place{line + 1, offset - l[line] + 1}
}
