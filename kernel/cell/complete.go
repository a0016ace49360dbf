package cell

// Completion is what may stand at the cursor.
type Completion struct {
	Start, End int // the part of the code that a match replaces, in code points
	Matches    []string
	Types      []string // beside Matches: "function", "module", "class", "instance", "keyword", ...
	Signatures []string // beside Matches
}

// Complete returns what may stand at the cursor, which counts code points. It may be called while a cell runs.
func (in *Interpreter) Complete(code string, cursor int) Completion {
	cursor = max(0, min(cursor, len([]rune(code))))
	return Completion{Start: cursor, End: cursor}
}
