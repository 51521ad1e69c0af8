package main

import "runtime/debug"

// version says which program this is: the module's version where it was
// installed by one, else the commit it was built from, "-changed" where the
// tree was not clean.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return "unknown"
	}
	var commit, changed string
	for _, s := range info.Settings {
		switch s.Key {
		case "vcs.revision":
			commit = s.Value
		case "vcs.modified":
			if s.Value == "true" {
				changed = "-changed"
			}
		}
	}
	if len(commit) >= 12 {
		return commit[:12] + changed
	}
	if v := info.Main.Version; v != "" && v != "(devel)" {
		return v
	}
	return "development build"
}
