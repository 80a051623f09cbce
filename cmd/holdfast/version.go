package main

import "runtime/debug"

// version is the module version the program was built as, with the revision
// where the build recorded one.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return "unknown"
	}
	v := info.Main.Version
	if v == "" {
		v = "(devel)"
	}
	for _, s := range info.Settings {
		if s.Key == "vcs.revision" {
			return v + " " + s.Value
		}
	}
	return v
}
