package job

import (
	"errors"
	"soctrial/plant/record"
)

func loadRecord(o *ReplayOptions) (*record.Record, string, error) {
	return nil, "", errors.New("not yet")
}
func showRecord(o *ShowOptions) (*Shown, error) { return nil, errors.New("not yet") }
