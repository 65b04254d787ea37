// Command realpart turns impedance sweeps of passive parts into equivalent
// circuits.
//
//	realpart fit part.csv
//
// reads what an LCR meter, impedance analyser or network analyser saved, tells
// the kind of part, chooses a circuit that the data support, and prints its
// values with their uncertainty, the self-resonances and the figures that data
// sheets state. `realpart help` lists the commands.
//
// Exit codes: 0 done; 1 done and the answer is no; 2 wrong use; 3 an input
// could not be read or fitted.
package main

import (
	"io"
	"os"
)

func main() {
	os.Exit(run(os.Args[1:], streams{in: os.Stdin, out: os.Stdout, err: os.Stderr}))
}

// streams are a command's standard input, output and error, and the command
// line that it was called with.
type streams struct {
	in       io.Reader
	out, err io.Writer
	command  string
}
