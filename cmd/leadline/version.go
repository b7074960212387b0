package main

import "runtime/debug"

// release is the version of the program.
const release = "0.1.0"

// version returns the release and, where the build recorded it, the revision.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return release
	}
	revision, modified := "", ""
	for _, s := range info.Settings {
		switch {
		case s.Key == "vcs.revision" && len(s.Value) >= 12:
			revision = "+" + s.Value[:12]
		case s.Key == "vcs.modified" && s.Value == "true":
			modified = ".modified"
		}
	}
	return release + revision + modified
}
