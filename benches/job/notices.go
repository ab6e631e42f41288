package job

import (
	"maps"
	"slices"
	"strings"
)

// notices gathers what the plant has to tell, each thing once.
type notices map[string]*noticed

type noticed struct {
	scenarios int
	first     int64
}

// add takes in what scenario id told. A scenario that repeats itself counts
// once.
func (n *notices) add(id int64, told []string) {
	if *n == nil {
		*n = notices{}
	}
	for i, t := range told {
		if slices.Contains(told[:i], t) {
			continue
		}
		x := (*n)[t]
		if x == nil {
			// A text may hold a time that differs in every scenario: enough is enough.
			if len(*n) >= 1000 {
				continue
			}
			x = &noticed{first: id}
			(*n)[t] = x
		}
		x.scenarios++
		x.first = min(x.first, id)
	}
}

// tell passes the most frequent ones on.
func (n notices) tell(r *Reporter) {
	texts := slices.SortedFunc(maps.Keys(n), func(a, b string) int {
		if d := n[b].scenarios - n[a].scenarios; d != 0 {
			return d
		}
		return strings.Compare(a, b)
	})
	const most = 5
	for i, t := range texts {
		if i == most {
			r.warn("%d more things were noticed in scenarios", len(texts)-most)
			return
		}
		x := n[t]
		if x.scenarios == 1 {
			r.warn("scenario %d: %s", x.first, t)
			continue
		}
		r.warn("%d scenarios, scenario %d first: %s", x.scenarios, x.first, t)
	}
}
