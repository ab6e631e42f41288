package job

import (
	"soctrial/benches/store"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

func drawCell(path string, c *cell.Cell, m *cell.Model) error   { return wrongf("none") }
func drawDuty(path, name string, p *duty.Program) error         { return wrongf("none") }
func drawRecord(path string, r *record.Record) error            { return wrongf("none") }
func drawTraces(path, from string, keys []store.TraceKey) error { return wrongf("none") }
func drawResults(path string, o *Outcome) error                 { return wrongf("none") }
