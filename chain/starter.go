package chain

import _ "embed" // for the starter chain file

//go:embed starter.toml
var starter string

// Starter returns a commented chain file to start from: a line feed on one 5 V supply.
func Starter() string { return starter }
