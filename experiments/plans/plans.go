// Package plans holds the plans that ship with the program, embedded so that
// they run from any directory.
package plans

import "embed"

// Files are the shipped plans, one TOML file each.
//
//go:embed *.toml
var Files embed.FS
