package session

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"maps"
	"slices"
	"unicode/utf8"

	"linewright/plotting"
)

// raw marshals an object of the protocol that shows a value: the given members, and the bundle's data and metadata.
// Texts go straight into the result and binary forms become one line of base64; a form that JSON cannot hold (a
// NaN in a +json form, say) is left out, and the others are shown.
func raw(members map[string]any, b plotting.Bundle) json.RawMessage {
	size := 0
	for _, v := range b.Data {
		switch v := v.(type) {
		case string:
			size += len(v) + len(v)/8
		case []byte:
			size += base64.StdEncoding.EncodedLen(len(v))
		}
	}
	out := make([]byte, 0, size+512)
	out = append(out, `{"data":{`...)
	for _, kind := range slices.Sorted(maps.Keys(b.Data)) {
		before := len(out)
		if out[before-1] != '{' {
			out = append(out, ',')
		}
		out = append(appendText(out, kind), ':')
		switch v := b.Data[kind].(type) {
		case string:
			out = appendText(out, v)
		case []byte:
			out = append(base64.StdEncoding.AppendEncode(append(out, '"'), v), '"')
		default:
			value, err := marshal(v)
			if err != nil {
				out = out[:before]
				continue
			}
			out = append(out, value...)
		}
	}
	out = append(out, `},"metadata":`...)
	if metadata, err := marshal(b.Metadata); err == nil && b.Metadata != nil {
		out = append(out, metadata...)
	} else {
		out = append(out, "{}"...)
	}
	for _, name := range slices.Sorted(maps.Keys(members)) {
		if value, err := marshal(members[name]); err == nil {
			out = append(appendText(append(out, ','), name), ':')
			out = append(out, value...)
		}
	}
	return append(out, '}')
}

func marshal(v any) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	err := e.Encode(v)
	return bytes.TrimSuffix(b.Bytes(), []byte("\n")), err
}

// appendText appends s as a JSON string (RFC 8259, 7). What is no UTF-8 becomes U+FFFD. It is package json's own form
// without the detours, which cost a large output several copies.
func appendText[T string | []byte](out []byte, s T) []byte {
	const hex = "0123456789abcdef"
	out = append(out, '"')
	from := 0
	for i := 0; i < len(s); {
		c := s[i]
		if c >= utf8.RuneSelf {
			r, n := utf8.DecodeRuneInString(string(s[i:min(i+utf8.UTFMax, len(s))]))
			if r == utf8.RuneError && n == 1 {
				out = append(append(out, s[from:i]...), "\ufffd"...)
				from = i + 1
			}
			i += n
			continue
		}
		if c >= ' ' && c != '"' && c != '\\' {
			i++
			continue
		}
		out = append(out, s[from:i]...)
		switch c {
		case '"', '\\':
			out = append(out, '\\', c)
		case '\n':
			out = append(out, '\\', 'n')
		case '\r':
			out = append(out, '\\', 'r')
		case '\t':
			out = append(out, '\\', 't')
		default:
			out = append(out, '\\', 'u', '0', '0', hex[c>>4], hex[c&15])
		}
		i++
		from = i
	}
	return append(append(out, s[from:]...), '"')
}
