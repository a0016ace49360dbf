package spectrum

import (
	"context"
	"runtime"
	"sync"
	"weak"

	"linewright/builtins/linecode"
)

// With one pulse for all levels, everything but that pulse, the rate and the volts is a matter of the code and its data:
// tones and forms of the levels. They are kept for as long as the code is.
var kept struct {
	sync.Mutex
	parts map[weak.Pointer[linecode.Code]][]part // guarded by the mutex; never changed once stored
}

// recall sets the parts for a single pulse, from what is kept if that has lags enough for the pulse.
func (p *PSD) recall(ctx context.Context, c *linecode.Code) error {
	lags, err := p.reach()
	if err != nil {
		return err
	}
	key := weak.Make(c)
	kept.Lock()
	parts, known := kept.parts[key]
	kept.Unlock()
	if known && parts[0].tones.lags >= lags {
		p.parts = parts
		return nil
	}
	if err := p.study(ctx, c); err != nil {
		return err
	}
	kept.Lock()
	defer kept.Unlock()
	if kept.parts == nil {
		kept.parts = map[weak.Pointer[linecode.Code]][]part{}
	}
	kept.parts[key] = p.parts
	if !known {
		runtime.AddCleanup(c, func(key weak.Pointer[linecode.Code]) {
			kept.Lock()
			defer kept.Unlock()
			delete(kept.parts, key)
		}, key)
	}
	return nil
}
