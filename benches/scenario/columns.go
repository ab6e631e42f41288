package scenario

import (
	"fmt"
	"math"
	"strings"
)

// Column is one column of a scenario set: its name, what it holds, what it
// allows, and where a Row keeps it. Parquet files, plans and messages all read
// this one table.
type Column struct {
	Name     string
	Kind     Kind
	Default  Value    // what an absent column or a null stands for; null: the definition's (or, of temperature_start_c, ambient)
	Required bool     // neither the column nor a value may be absent
	Range    Range    // of Number and Int
	Words    []string // of Text: the only values allowed; nil: any

	number func(*Row) *float64
	get    func(*Row) Value
	set    func(*Row, Value)
}

func everything() Range { return Range{Low: math.Inf(-1), High: math.Inf(1)} }

func atLeast(x float64) Range { return Range{Low: x, High: math.Inf(1)} }
func above(x float64) Range   { return Range{Low: x, High: math.Inf(1), LowOpen: true} }

const absoluteZeroC = -273.15

// maxSubsteps keeps a mistyped plant_substeps from running for weeks.
const maxSubsteps = 1_000_000

// Columns returns every column a set may have but labels, in the order in
// which sets are written: identity, start, ageing, drift, plant, sensors.
func Columns() []Column {
	cols := []Column{
		{Name: "scenario_id", Kind: Int, Required: true, Range: atLeast(0),
			get: func(r *Row) Value { return IntValue(r.ID) },
			set: func(r *Row, v Value) { r.ID = v.Int }},
		// A seed is 64 bits, stored as int64; which ones are negative is no matter.
		{Name: "seed", Kind: Int, Required: true, Range: everything(),
			get: func(r *Row) Value { return IntValue(int64(r.Seed)) },
			set: func(r *Row, v Value) { r.Seed = uint64(v.Int) }},
		text("cell", true, nil, func(r *Row) *string { return &r.Cell }),
		text("duty", true, nil, func(r *Row) *string { return &r.Duty }),
		text("sensors", true, nil, func(r *Row) *string { return &r.Sensors }),
		text("group", false, nil, func(r *Row) *string { return &r.Group }),

		number("soc_start", 1, Range{Low: 0, High: 1}, func(r *Row) *float64 { return &r.SOCStart }),
		number("soc_start_error", 0, Range{Low: -1, High: 1}, func(r *Row) *float64 { return &r.SOCStartError }),
		number("hysteresis_start", 0, Range{Low: -1, High: 1}, func(r *Row) *float64 { return &r.HysteresisStart }),
		number("temperature_start_c", math.NaN(), above(absoluteZeroC), func(r *Row) *float64 { return &r.TemperatureStartC }),
		number("ambient_c", 25, above(absoluteZeroC), func(r *Row) *float64 { return &r.AmbientC }),

		number("capacity_scale", 1, above(0), func(r *Row) *float64 { return &r.CapacityScale }),
		number("r0_scale", 1, atLeast(0), func(r *Row) *float64 { return &r.R0Scale }),
		number("branch_r_scale", 1, atLeast(0), func(r *Row) *float64 { return &r.BranchRScale }),
		number("branch_tau_scale", 1, above(0), func(r *Row) *float64 { return &r.BranchTauScale }),
		number("ocv_offset_v", 0, everything(), func(r *Row) *float64 { return &r.OCVOffsetV }),

		number("r0_drift_per_h", 0, everything(), func(r *Row) *float64 { return &r.R0DriftPerH }),
		number("capacity_drift_per_h", 0, everything(), func(r *Row) *float64 { return &r.CapacityDriftPerH }),
		number("r0_walk_per_sqrt_h", 0, atLeast(0), func(r *Row) *float64 { return &r.R0WalkPerSqrtH }),

		{Name: "plant_substeps", Kind: Int, Default: IntValue(1), Range: Range{Low: 1, High: maxSubsteps},
			get: func(r *Row) Value { return IntValue(int64(r.PlantSubsteps)) },
			set: func(r *Row, v Value) { r.PlantSubsteps = int(v.Int) }},
	}
	for i, name := range SensorColumns() {
		c := number(name, math.NaN(), sensorRange(name), func(r *Row) *float64 { return &r.Override[i] })
		if strings.HasSuffix(name, "_every") {
			at := c.number
			c.Kind, c.Default = Int, NullValue(Int)
			c.get = func(r *Row) Value {
				if x := *at(r); x == x {
					return IntValue(int64(x))
				}
				return NullValue(Int)
			}
			c.set = func(r *Row, v Value) {
				*at(r) = float64(v.Int)
				if v.Null {
					*at(r) = math.NaN()
				}
			}
		}
		cols = append(cols, c)
	}
	return append(cols, text("current_reading", false,
		[]string{"instant", "interval-mean"},
		func(r *Row) *string { return &r.CurrentReading }))
}

// sensorRange is what a key of a sensors file allows.
func sensorRange(column string) Range {
	_, key, _ := strings.Cut(column, "_")
	switch {
	case key == "every":
		return Range{Low: 1, High: maxSubsteps}
	case strings.HasSuffix(key, "_share"):
		return Range{Low: 0, High: 1, HighOpen: true}
	case key == "gain_error", strings.HasPrefix(key, "offset_"):
		return everything()
	}
	return atLeast(0)
}

func number(name string, def float64, allowed Range, at func(*Row) *float64) Column {
	return Column{Name: name, Kind: Number, Default: NumberValue(def), Range: allowed, number: at,
		get: func(r *Row) Value { return NumberValue(*at(r)) },
		set: func(r *Row, v Value) {
			*at(r) = v.Number
			if v.Null {
				*at(r) = math.NaN()
			}
		}}
}

func text(name string, required bool, words []string, at func(*Row) *string) Column {
	def := NullValue(Text)
	return Column{Name: name, Kind: Text, Default: def, Required: required, Range: everything(), Words: words,
		get: func(r *Row) Value {
			if *at(r) == "" {
				return NullValue(Text)
			}
			return TextValue(*at(r))
		},
		set: func(r *Row, v Value) { *at(r) = v.Text }}
}

// Get returns what the row holds in this column. Null stands where the
// definition's value rules, or where a text is empty.
func (c *Column) Get(r *Row) Value { return c.get(r) }

// Set puts v into the row. A null stands for the default. A whole double does
// for an Int, and a whole number that a double holds exactly for a Number;
// anything else, and anything out of range, is a *ValueError and leaves the
// row as it was.
func (c *Column) Set(r *Row, v Value) error {
	v, err := c.Fit(v)
	if err != nil {
		return err
	}
	c.set(r, v)
	return nil
}

// Fit returns v as this column keeps it, with the default in place of a null,
// or says why it does not fit.
func (c *Column) Fit(v Value) (Value, error) {
	if v.Null {
		if c.Required {
			return v, bad(c.Name, "nothing", c.Allowed())
		}
		return c.Default, nil
	}
	found := v.String()
	switch {
	case c.Kind == Int && v.Kind == Number:
		n, ok := whole(v.Number)
		if !ok {
			return v, bad(c.Name, found, c.Allowed())
		}
		v = IntValue(n)
	case c.Kind == Number && v.Kind == Int:
		if v.Int > exactInt || v.Int < -exactInt {
			return v, bad(c.Name, found, "a number that a double holds exactly")
		}
		v = NumberValue(float64(v.Int))
	}
	if v.Kind != c.Kind || !c.holds(v) {
		return v, bad(c.Name, found, c.Allowed())
	}
	return v, nil
}

// holds tells whether v, of the column's kind and not null, is allowed.
func (c *Column) holds(v Value) bool {
	switch c.Kind {
	case Number:
		return c.Range.Holds(v.Number)
	case Int:
		return c.Range.Holds(float64(v.Int))
	}
	if c.Required && v.Text == "" {
		return false
	}
	if c.Words == nil || v.Text == "" {
		return true
	}
	for _, w := range c.Words {
		if v.Text == w {
			return true
		}
	}
	return false
}

// Allowed says in words what the column allows, e.g. "a number in [0, 1]".
func (c *Column) Allowed() string {
	switch {
	case c.Kind == Text && c.Words != nil:
		return strings.Join(c.Words, " or ")
	case c.Kind == Text && c.Required:
		return "a text that is not empty"
	case c.Kind == Text:
		return "a text"
	case c.Range == everything() && c.Kind == Int:
		return "a whole number"
	case c.Range == everything():
		return "any finite number"
	case c.Range.String()[0] == '[' || c.Range.String()[0] == '(':
		return fmt.Sprintf("a %s in %s", c.Kind, c.Range)
	}
	return fmt.Sprintf("a %s %s", c.Kind, c.Range)
}

// DefaultRow returns the row of a set that has no column but the required
// ones, which are left empty.
func DefaultRow() Row {
	var r Row
	for _, c := range Columns() {
		if !c.Required {
			c.set(&r, c.Default)
		}
	}
	return r
}

// Find returns the column called name.
func Find(name string) (Column, bool) {
	for _, c := range Columns() {
		if c.Name == name {
			return c, true
		}
	}
	return Column{}, false
}

// LabelPrefix begins the name of a number column that is carried along and
// never computed with.
const LabelPrefix = "label_"

// Nearest returns the known column whose name is nearest to name by edit
// distance (insert, delete, replace a letter, or swap two neighbours: optimal
// string alignment); of equals the first in the order of Columns.
func Nearest(name string) string {
	best, least := "", math.MaxInt
	for _, c := range Columns() {
		if d := distance(name, c.Name); d < least {
			best, least = c.Name, d
		}
	}
	return best
}

// Closest is Nearest among the given names; empty when there are none.
func Closest(name string, known []string) string {
	best, least := "", math.MaxInt
	for _, k := range known {
		if d := distance(name, k); d < least {
			best, least = k, d
		}
	}
	return best
}

// distance is the optimal string alignment distance between a and b.
func distance(a, b string) int {
	before, last := make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row := make([]int, len(b)+1)
		row[0] = i
		for j := 1; j <= len(b); j++ {
			change := 1
			if a[i-1] == b[j-1] {
				change = 0
			}
			row[j] = min(last[j]+1, row[j-1]+1, last[j-1]+change)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last = last, row
	}
	return last[len(b)]
}

// Validate says which column of the row, or which sensor value, is not
// allowed. Whether its definitions exist is for Set.Validate.
func (r *Row) Validate() error { return validateRow(r, Columns()) }

// validateRow is Validate with the table at hand, for whole sets.
func validateRow(r *Row, cols []Column) error {
	for i := range cols {
		c := &cols[i]
		if c.number != nil {
			// An infinity is not a null, and NaN only where the default is null.
			x := *c.number(r)
			if math.IsNaN(x) && !c.Default.Null {
				return bad(c.Name, "NaN", c.Allowed())
			}
			_, isWhole := whole(x)
			if !math.IsNaN(x) && (!c.Range.Holds(x) || c.Kind == Int && !isWhole) {
				return bad(c.Name, NumberValue(x).String(), c.Allowed())
			}
			continue
		}
		v := c.get(r)
		if v.Null && !c.Required {
			continue
		}
		if _, err := c.Fit(v); err != nil {
			return err
		}
	}
	for _, l := range r.Labels {
		if l.IsNumber && !strings.HasPrefix(l.Column, LabelPrefix) {
			return bad(l.Column, "an unknown column of numbers",
				fmt.Sprintf("a known column (the nearest is %s) or a name that begins with %s", Nearest(l.Column), LabelPrefix))
		}
	}
	return nil
}
