package define

import (
	"strings"
	"testing"
)

// everyLeg has a leg of every kind, in tables, arrays of tables and inline.
const everyLeg = `format = "soctrial/duty/1"
name = "every kind"
[vehicle]
mass_kg = 900
rolling_coefficient = 0.012
drag_area_m2 = 0.8
drive_efficiency = 0.85
regeneration_efficiency = 0.6
series = 96
[[leg]]
kind = "pulses"
c_rate = 1.0
pulse_s = 10.0
rest_s = 40.0
count = 9
return_ratio = 0.75
soc_step = 0.1
step_c_rate = 0.33
step_rest_s = 3600.0
[[leg]]
kind = "group"
repeat = 3
until_soc = 0.2
[[leg.leg]]
kind = "speed"
time_s = [0.0, 5.0, 9.0]
speed_mps = [
  0.0,
  4.0, # the gate
  0.0,
]
[[leg.leg]]
kind = "profile"
name = "dst"
peak_power_w = 40.0
at_limit = "cut"
[[leg.leg]]
kind = "group"
leg = [
  { kind = "rest", duration_s = 60 },
  { kind = "power", power_w = 12.5, duration_s = 60 },
]
[[leg]]
kind = "hold-voltage"
voltage_v = 4.2
until_c_rate = 0.05
[[leg]]
kind = "profile"
name = "nedc"
[leg.vehicle]
mass_kg = 500
rolling_coefficient = 0.01
drag_area_m2 = 0.5
[[leg]]
kind = "trace"
time_s = [0, 1]
power_w = [3, 0]
[[leg]]
kind = "current"
current_a = -2
duration_s = 10
`

// edit spoils one place of a text that is otherwise good; an empty old means at
// its end. The message it must give is whole.
type edit struct{ kind, old, new, want string }

func goodTexts() map[string]string {
	return map[string]string{"cell": cellText, "duty": dutyText, "legs": everyLeg, "sensors": sensorsText, "estimator": estimatorText,
		"plan": planText, "map": mapText}
}

// refused checks that every error names file, line and column, key, what was
// found and what is allowed.
func refused(t *testing.T, edits []edit) {
	t.Helper()
	for _, e := range edits {
		good := goodTexts()[e.kind]
		if !strings.Contains(good, e.old) {
			t.Errorf("%q is not in %s", e.old, e.kind)
		}
		bad := good + e.new
		if e.old != "" {
			bad = strings.Replace(good, e.old, e.new, 1)
		}
		err := readKind(e.kind, bad)
		if err == nil {
			t.Errorf("%s with %q for %q: accepted, want\n  %s", e.kind, e.new, e.old, e.want)
		} else if err.Error() != e.want {
			t.Errorf("%s with %q for %q:\n  %v\nwant\n  %s", e.kind, e.new, e.old, err, e.want)
		}
	}
}

func readKind(kind, text string) error {
	var err error
	switch kind {
	case "cell":
		_, err = Cell("f.toml", []byte(text))
	case "duty", "legs":
		_, err = Duty("f.toml", []byte(text), Openers{})
	case "sensors":
		_, err = Sensors("f.toml", []byte(text))
	case "estimator":
		_, err = Estimator("f.toml", []byte(text), Openers{})
	case "plan":
		_, err = Plan("f.toml", []byte(text))
	case "map":
		_, err = Map("f.toml", []byte(text))
	}
	return err
}

func TestGoodTextsAreRead(t *testing.T) {
	for kind, text := range goodTexts() {
		for how, text := range map[string]string{"as it is": text, "after a byte order mark": byteOrderMark + text,
			"with lines of two ends": strings.ReplaceAll(text, "\n", "\r\n")} {
			if err := readKind(kind, text); err != nil {
				t.Errorf("%s %s: %v", kind, how, err)
			}
		}
	}
}

// Nesting without end is refused or passed over, never a crash or a hang.
func TestDeepNesting(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"a = " + strings.Repeat("[", 100_000), "nested more than the maximum"},
		{"a = " + strings.Repeat("{a = ", 100_000), "nested more than the maximum"},
		{"a = " + strings.Repeat("[", 9_000) + strings.Repeat("]", 9_000), `f.toml:10:1: a: found an unknown key "a"`},
		{"a = " + strings.Repeat("{ a = ", 9_000) + "1" + strings.Repeat("}", 9_000), `f.toml:10:1: a: found an unknown key "a"`},
		{"a" + strings.Repeat(".a", 20_000) + " = 1", `f.toml:10:1: a: found an unknown key "a"`},
		{"[a" + strings.Repeat(".a", 20_000) + "]", `f.toml:10:2: a: found an unknown key "a"`},
	} {
		if err := readKind("cell", cellText+c.text); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%.20s…: got %.200v, want %s", c.text, err, c.want)
		}
	}
	deep := "format = \"soctrial/duty/1\"\nleg = " + strings.Repeat("[{ kind = \"group\", leg = ", 500) + "[]" + strings.Repeat("}]", 500)
	if err := readKind("duty", deep); err == nil || !strings.Contains(err.Error(), "groups nested 9 deep, allowed is at most 8") {
		t.Errorf("got %.300v", err)
	}
}
