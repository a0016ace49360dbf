package main

import (
	"fmt"
	"runtime"
	"runtime/debug"
)

type versionCommand struct{}

func (versionCommand) Run(s streams) error {
	_, err := fmt.Fprintf(s.out, "linewright %s %s %s/%s\n", version(), runtime.Version(), runtime.GOOS, runtime.GOARCH)
	return err
}

// version returns the module's version, or for a build of a checkout "devel" with the commit where the build has it.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return "devel"
	}
	if v := info.Main.Version; v != "" && v != "(devel)" {
		return v
	}
	for _, s := range info.Settings {
		if s.Key == "vcs.revision" && len(s.Value) >= 12 {
			return "devel-" + s.Value[:12]
		}
	}
	return "devel"
}
