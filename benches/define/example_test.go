package define_test

import (
	"fmt"

	"soctrial/benches/define"
)

// A cell of a straight OCV and one branch; the mistake is told with its place.
func ExampleCell() {
	text := `format = "soctrial/cell/1"
capacity_ah = 50
voltage_min_v = 2.5
voltage_max_v = 3.65
ocv = { soc = [0, 1], voltage_v = [3.0, 3.4] }
r0 = { ohm = 0.001 }
branch = [{ ohm = 0.002, tau_s = -30 }]
`
	_, err := define.Cell("cells/quay.toml", []byte(text))
	fmt.Println(err)
	// Output: cells/quay.toml:7:26: branch[0].tau_s: found -30, allowed is a finite number > 0
}
