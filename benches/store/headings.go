package store

import (
	"strings"
	"unicode"
)

// plainWords are the headings, without their unit, in lower case and closed
// up, that obviously mean one thing. The single letters T and t are told apart
// by their case.
var plainWords = [roles]string{
	timeRole: "|time|testtime|totaltime|elapsedtime|elapsed|timeelapsed|runtime|recordtime|t|",
	currentRole: "|current|cellcurrent|packcurrent|batterycurrent|modulecurrent|measuredcurrent|" +
		"i|icell|ipack|ibatt|amps|amperage|",
	voltageRole: "|voltage|cellvoltage|packvoltage|batteryvoltage|modulevoltage|terminalvoltage|measuredvoltage|" +
		"u|v|e|ecell|ewe|ucell|vcell|vpack|vbatt|volts|potential|",
	temperatureRole: "|temperature|temp|celltemperature|celltemp|batterytemperature|batterytemp|packtemperature|packtemp|" +
		"surfacetemperature|surfacetemp|cantemperature|cantemp|tcell|measuredtemperature|",
	socRole: "|soc|stateofcharge|referencesoc|socreference|truesoc|soctrue|",
}

// dateWords head wall-clock columns, used where no other time is there.
const dateWords = "|datetime|date|timestamp|datetimestamp|absolutetime|systemtime|"

// heading is what a heading seems to mean.
type heading struct {
	role   role
	unit   string // as named; empty: the heading gives none
	native bool   // exactly our own name
	date   bool   // a wall clock
	known  bool
}

// recognise says what a heading obviously means.
func recognise(head string) heading {
	for r, name := range nativeNames {
		if head == name {
			return heading{role: role(r), unit: nativeUnits[r], native: true, known: true}
		}
	}
	whole := plainWord(head)
	base, unitWord := cutUnit(head)
	switch strings.TrimSpace(head) {
	case "T":
		return heading{role: temperatureRole, known: true}
	case "C", "A", "s":
		return heading{} // a unit alone
	}
	for r := range roles {
		if plainWords[r] == "" {
			continue
		}
		// The unit first: the plain word of "SOC [%]" has lost it.
		if unitWord == "" || base == "" {
			if strings.Contains(plainWords[r], "|"+whole+"|") {
				return heading{role: r, known: true}
			}
			continue
		}
		if strings.TrimSpace(base) == "T" && r != temperatureRole {
			if _, ok := spelledUnit(temperatureRole, unitWord); ok {
				continue
			}
		}
		if name, ok := spelledUnit(r, unitWord); ok &&
			(strings.Contains(plainWords[r], "|"+plainWord(base)+"|") || r == temperatureRole && strings.TrimSpace(base) == "T") {
			return heading{role: r, unit: name, known: true}
		}
		// A unit of signs alone that is none of this role's is no plain word.
		if plainWord(unitWord) != "" && strings.Contains(plainWords[r], "|"+whole+"|") {
			return heading{role: r, known: true}
		}
	}
	if strings.Contains(dateWords, "|"+whole+"|") {
		return heading{role: timeRole, unit: "datetime", date: true, known: true}
	}
	return heading{}
}

// cutUnit parts a heading from the unit it ends in: in brackets, behind a
// slash, a comma, a space or an underscore.
func cutUnit(head string) (base, unitWord string) {
	head = strings.TrimSpace(head)
	for _, b := range []string{"()", "[]", "{}", "<>"} {
		if i := strings.IndexByte(head, b[0]); i > 0 && strings.HasSuffix(head, b[1:]) {
			return head[:i], head[i+1 : len(head)-1]
		}
	}
	if base, ok := strings.CutSuffix(head, "%"); ok {
		return strings.TrimRight(base, "/,_ "), "%"
	}
	for _, mark := range []string{"/", ",", "_", " "} {
		if i := strings.LastIndex(head, mark); i > 0 {
			return head[:i], head[i+1:]
		}
	}
	return head, ""
}

// plainWord is a heading in lower case, letters and digits only.
func plainWord(s string) string {
	words := strings.FieldsFunc(s, func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	return strings.ToLower(strings.Join(words, ""))
}
