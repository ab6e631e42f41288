package scenario

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"

	"soctrial/noise"
)

// Validate says what is not allowed in the set: a value in a row, two rows of
// one scenario_id, a definition that is named but lacking, values that do not
// go with a row's definitions, a definition's name that ends in .sha256 (its
// text would be taken for a hash), or a limit on a group no row belongs to.
// Metrics that limits name are for CheckLimits. Duties are not walked.
func (s *Set) Validate() error {
	for _, names := range []struct {
		kind string
		of   []string
	}{{"cell", sortedKeys(s.Cells)}, {"duty", sortedKeys(s.Duties)}, {"sensors", sortedKeys(s.Sensors)}} {
		for _, name := range names.of {
			if name == "" || strings.HasSuffix(name, ".sha256") {
				return bad(names.kind, fmt.Sprintf("a definition named %q", name), "a name that is not empty and does not end in .sha256")
			}
		}
	}
	if err := s.Score.Validate(); err != nil {
		return err
	}
	columns := Columns()
	seen := make(map[int64]struct{}, len(s.Rows))
	groups := map[string]bool{}
	for i := range s.Rows {
		r := &s.Rows[i]
		if _, twice := seen[r.ID]; twice {
			return bad("scenario_id", fmt.Sprintf("%d in more than one row", r.ID), "each id once")
		}
		seen[r.ID] = struct{}{}
		groups[r.Group] = true
		err := validateRow(r, columns)
		if err == nil {
			err = s.validateNamed(r)
		}
		if err != nil {
			return fmt.Errorf("scenario %d: %w", r.ID, err)
		}
	}
	for i, l := range s.Limits {
		if l.Group != "" && !groups[l.Group] {
			return bad(fmt.Sprintf("limit[%d].group", i), fmt.Sprintf("%q", l.Group),
				groupsAllowed(groups))
		}
	}
	return nil
}

// Draws returns which draw each scenario belongs to, by its id, where the set
// has a column label_draw: equal numbers are one draw, whatever they are. A
// scenario without one is not in it.
func (s *Set) Draws() map[int64]int64 {
	draws := map[int64]int64{}
	for i := range s.Rows {
		for _, l := range s.Rows[i].Labels {
			if l.Column == drawLabel && l.IsNumber && !math.IsNaN(l.Number) {
				draws[s.Rows[i].ID] = int64(math.Float64bits(l.Number))
			}
		}
	}
	return draws
}

// validateNamed checks a row against the definitions it names.
func (s *Set) validateNamed(r *Row) error {
	c := s.Cells[r.Cell]
	sensors := s.Sensors[r.Sensors]
	switch {
	case c == nil:
		return lacking("cell", r.Cell, sortedKeys(s.Cells))
	case s.Duties[r.Duty] == nil:
		return lacking("duty", r.Duty, sortedKeys(s.Duties))
	case sensors == nil:
		return lacking("sensors", r.Sensors, sortedKeys(s.Sensors))
	case c.Thermal == nil && !math.IsNaN(r.TemperatureStartC) && r.TemperatureStartC != r.AmbientC:
		return bad("temperature_start_c", fmt.Sprint(r.TemperatureStartC),
			fmt.Sprintf("none, or ambient_c (%g): cell %s has no [thermal] and stays at ambient", r.AmbientC, r.Cell))
	}
	read := r.Override.Apply(*sensors)
	for _, ch := range []struct {
		name string
		of   *noise.Channel
	}{{"current", &read.Current}, {"voltage", &read.Voltage}, {"temperature", &read.Temperature}} {
		if ch.of.DropoutShare > 0 && !(ch.of.DropoutS > 0) {
			return bad(ch.name+"_dropout_s", fmt.Sprint(ch.of.DropoutS), fmt.Sprintf("> 0 with a share of %g", ch.of.DropoutShare))
		}
		if ch.of.StuckShare > 0 && !(ch.of.StuckS > 0) {
			return bad(ch.name+"_stuck_s", fmt.Sprint(ch.of.StuckS), fmt.Sprintf("> 0 with a share of %g", ch.of.StuckShare))
		}
	}
	return nil
}

func lacking(kind, name string, known []string) error {
	allowed := "one it does (it defines none)"
	if len(known) > 0 {
		allowed = fmt.Sprintf("one of %q", known)
	}
	return bad(kind, fmt.Sprintf("%q, which the set does not define", name), allowed)
}

func sortedKeys[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }

func groupsAllowed(groups map[string]bool) string {
	named := slices.DeleteFunc(sortedKeys(groups), func(g string) bool { return g == "" })
	if len(named) == 0 {
		return "none: no scenario of the set has a group (a plan varies the column group)"
	}
	return fmt.Sprintf("a group of the set, one of %q", named)
}
