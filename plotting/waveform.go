package plotting

import (
	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

// Waveform is to come.
func Waveform(c *linecode.Code, t pulse.Train, bits []byte) *Figure { panic("stub") }
