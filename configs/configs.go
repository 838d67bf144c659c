// Package configs carries the example skid files, so that the demo needs nothing but its binary.
package configs

import "embed"

// Files holds the example skid files by name.
//
//go:embed *.yaml
var Files embed.FS
