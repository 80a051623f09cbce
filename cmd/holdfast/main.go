// Command holdfast finds out which predictors of a wide table are reliably
// chosen, and how many of them could be there by luck. Run it with --help.
package main

import "os"

func main() { os.Exit(run(os.Args[1:], os.Stdout, os.Stderr)) }
