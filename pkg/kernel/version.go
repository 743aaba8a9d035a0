package kernel

import "runtime/debug"

// Version returns the version of the module this program was built from, "0.1.0" when it was built in a checkout.
func Version() string {
	if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" && info.Main.Version != "(devel)" {
		return info.Main.Version
	}
	return "0.1.0"
}
