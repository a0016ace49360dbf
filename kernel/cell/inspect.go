package cell

import "linewright/plotting"

// Inspect says what the name at the cursor is. It may be called while a cell runs.
func (in *Interpreter) Inspect(code string, cursor, detail int) (plotting.Bundle, bool) {
	return plotting.Bundle{}, false
}
