// Package datasets embeds the demonstration benches, so that an installed
// command can write them without a checkout. All of them are invented.
package datasets

import "embed"

// Files holds one folder a bench.
//
//go:embed */*.toml */*.csv */*.md
var Files embed.FS
