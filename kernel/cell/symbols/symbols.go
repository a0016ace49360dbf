// Package symbols holds the symbol tables by which interpreted cells reach compiled packages: the module's own builtins
// and plotting, gonum and gonum/plot. Its other files are generated (see kernel/cell).
package symbols

import "reflect"

// Symbols maps "import/path/name" to the exported symbols of the package, in the form that yaegi uses.
var Symbols = map[string]map[string]reflect.Value{}
