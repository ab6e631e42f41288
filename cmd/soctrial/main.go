// Command soctrial proves state-of-charge estimators on a bench before any
// hardware is at stake: it draws scenario sets, runs estimators over them or
// over recorded tests, and says how wrong they are and whether they know.
//
// Results go to standard output, progress and messages to standard error. It
// exits 0 when done, 1 when a limit failed or cannot be told, 2 when the input
// or the call is wrong, 3 when the tool failed, 130 when interrupted.
package main

import "os"

func main() {
	os.Exit(run(os.Args[1:], os.Stdout, os.Stderr))
}
