package session

import (
	"encoding/json"
	"maps"
	"slices"
	"strings"
	"testing"

	"linewright/kernel/wire"
)

// No content of a request makes a handler panic, and every answer can be sent. Cells are not run: a fuzzer's code would
// do as it likes.
func FuzzRequest(f *testing.F) {
	kinds := slices.Sorted(maps.Keys(requests))
	for i, kind := range kinds {
		f.Add(byte(i), `{}`)
		if kind == "complete_request" || kind == "inspect_request" || kind == "is_complete_request" {
			f.Add(byte(i), `{"code":"linecode.AMI(","cursor_pos":13}`)
			f.Add(byte(i), `{"code":"x := żó😀.","cursor_pos":-4,"detail_level":7}`)
			f.Add(byte(i), `{"code":"for i := range 3 {\n\tfmt.Prin"}`)
		}
	}
	f.Add(byte(slices.Index(kinds, "history_request")), `{"hist_access_type":"search","pattern":"[!a-\\]*?[","n":-1,"unique":true,"output":true}`)
	f.Add(byte(slices.Index(kinds, "history_request")), `{"hist_access_type":"range","session":-1,"start":-9,"stop":9}`)
	k, c := serveCells(f)
	c.execute("x := 3\nfunc double(n int) int { return 2 * n }", nil)
	f.Fuzz(func(t *testing.T, kind byte, content string) {
		if !json.Valid([]byte(content)) || !strings.HasPrefix(content, "{") {
			return // package wire drops it
		}
		name := kinds[int(kind)%len(kinds)]
		answer, err := k.handle(wire.Shell, &wire.Message{Type: name, Content: json.RawMessage(content), Header: json.RawMessage("{}")})
		if err != nil {
			if strings.Contains(err.Error(), "the kernel failed") {
				t.Errorf("%s %s: %v", name, content, err)
			}
			return
		}
		if _, err := json.Marshal(answer); err != nil {
			t.Errorf("%s %s: %v", name, content, err)
		}
	})
}
