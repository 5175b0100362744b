package configs

import "embed"

// Demo is the demo scenario: scene, recipes and volume plan. Shop, part, processes and
// figures are invented.
//
//go:embed demo
var Demo embed.FS
