package main

import (
	"fmt"
	"runtime/debug"

	"tripwell/forms"
)

type versionCmd struct{}

// Run prints the build's version and the version of the judging rules.
func (versionCmd) Run(e *env) error {
	version := "built from source"
	if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" && info.Main.Version != "(devel)" {
		version = info.Main.Version
	}
	_, err := fmt.Fprintf(e.stdout, "tripwell %s, judge version %d\n", version, forms.JudgeVersion)
	return err
}
