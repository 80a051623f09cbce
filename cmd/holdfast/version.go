package main

import "runtime/debug"

// release is the version that `make release` builds: the linker sets it.
var release string

// version is the release, or the module version the program was built as,
// with the revision where the build recorded one.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		info = &debug.BuildInfo{}
	}
	v := info.Main.Version
	if release != "" {
		v = release
	}
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
