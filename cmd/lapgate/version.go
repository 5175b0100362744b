package main

import (
	"fmt"
	"runtime/debug"
)

// Set by the linker: -ldflags "-X main.version=… -X main.commit=…".
var version, commit string

// versionText returns version and commit, from the linker or else from what the Go
// tool wrote into the program.
func versionText() string {
	v, c := version, commit
	if info, ok := debug.ReadBuildInfo(); ok {
		if v == "" {
			v = info.Main.Version
		}
		for _, s := range info.Settings {
			if s.Key == "vcs.revision" && c == "" {
				c = s.Value
			}
		}
	}
	if c == "" {
		c = "unknown"
	}
	return fmt.Sprintf("lapgate %s commit %s", v, c)
}
