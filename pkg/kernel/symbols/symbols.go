// Package symbols links into the kernel the packages that notebook cells may import: its generated files register
// each package's symbols with the interpreter, and Docs holds their documentation. Only cmd/guardring-kernel imports
// it.
package symbols

import "embed"

//go:generate go run example.org/guardring/pkg/kernel/internal/gensymbols

// Docs holds the documentation index, one JSON file a package, in the folder docs; see pkg/kernel/docindex.
//
//go:embed docs/*.json
var Docs embed.FS
