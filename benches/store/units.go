package store

import (
	"fmt"
	"strings"
)

// unit is a unit of a file: native = value·scale + offset.
type unit struct {
	scale, offset float64
	datetime      bool
}

// role is what a column of a record means.
type role int

// The roles of a record's columns.
const (
	timeRole role = iota
	currentRole
	voltageRole
	temperatureRole
	socRole
	chargeRole
	roles
)

var roleNames = [roles]string{"time", "current", "voltage", "temperature", "soc", "charge"}
var nativeUnits = [roles]string{"s", "A", "V", "degC", "fraction", "Ah"}
var nativeNames = [roles]string{"time_s", "current_a", "voltage_v", "temperature_c", "soc", "charge_ah"}

// units are the units a map may name for each role, and their spellings in headings.
var units = [roles][]struct {
	name      string
	spellings []string // lower case
	unit      unit
}{
	timeRole: {
		{"s", []string{"s", "sec", "secs", "second", "seconds", "hh:mm:ss", "h:m:s", "hh:mm:ss.fff"}, unit{scale: 1}},
		{"min", []string{"min", "mins", "minute", "minutes"}, unit{scale: 60}},
		{"h", []string{"h", "hr", "hrs", "hour", "hours"}, unit{scale: 3600}},
		{"ms", []string{"ms", "msec", "millisecond", "milliseconds"}, unit{scale: 1e-3}},
		{"datetime", []string{"datetime"}, unit{scale: 1, datetime: true}},
	},
	currentRole: {
		{"A", []string{"a", "amp", "amps", "ampere", "amperes"}, unit{scale: 1}},
		{"mA", []string{"ma", "milliamp", "milliamps"}, unit{scale: 1e-3}},
	},
	voltageRole: {
		{"V", []string{"v", "volt", "volts"}, unit{scale: 1}},
		{"mV", []string{"mv", "millivolt", "millivolts"}, unit{scale: 1e-3}},
	},
	temperatureRole: {
		{"degC", []string{"degc", "c", "°c", "º c", "ºc", "deg c", "deg. c", "celsius", "℃"}, unit{scale: 1}},
		{"degF", []string{"degf", "f", "°f", "fahrenheit", "deg f"}, unit{scale: 5. / 9, offset: -32 * 5. / 9}},
		{"K", []string{"k", "kelvin"}, unit{scale: 1, offset: -273.15}},
	},
	socRole: {
		{"fraction", []string{"fraction", "-", "1", "pu", "p.u."}, unit{scale: 1}},
		{"percent", []string{"percent", "%", "pct"}, unit{scale: 1e-2}},
	},
	chargeRole: {
		{"Ah", []string{"ah", "a.h", "a*h", "a·h"}, unit{scale: 1}},
		{"mAh", []string{"mah", "ma.h", "ma*h", "ma·h"}, unit{scale: 1e-3}},
		{"As", []string{"as", "c", "a.s", "coulomb", "coulombs"}, unit{scale: 1. / 3600}},
	},
}

// namedUnit returns the unit a map names, exactly as written there.
func namedUnit(r role, name string) (unit, error) {
	var allowed []string
	for _, u := range units[r] {
		if u.name == name {
			return u.unit, nil
		}
		allowed = append(allowed, u.name)
	}
	return unit{}, fmt.Errorf("%s: unit is %q; %s are allowed", roleNames[r], name, strings.Join(allowed, ", "))
}

// spelledUnit returns the unit that a heading spells.
func spelledUnit(r role, word string) (string, bool) {
	word = strings.ToLower(strings.TrimSpace(word))
	for _, u := range units[r] {
		for _, s := range u.spellings {
			if s == word {
				return u.name, true
			}
		}
	}
	return "", false
}

// convert turns a file's value into the native unit. A scale of whole parts
// is divided by, so that 3400 mV is 3.4 V to the last bit.
func (u unit) convert(x float64) float64 {
	switch u.scale {
	case 1:
	case 1e-3:
		x /= 1e3
	case 1e-2:
		x /= 1e2
	default:
		x *= u.scale
	}
	return x + u.offset
}
