package session

import (
	"context"
	"os"
	"strconv"
	"syscall"
)

// parentGone waits until the process that started this one is gone; front ends pass a handle of it in JPY_PARENT_PID.
// Without one it returns at once. A kernel that outlives its front end would run for ever.
func parentGone(context.Context) (name string, gone bool) {
	name = os.Getenv("JPY_PARENT_PID")
	handle, err := strconv.ParseUint(name, 10, 64)
	if err != nil || handle == 0 {
		return "", false
	}
	event, err := syscall.WaitForSingleObject(syscall.Handle(handle), syscall.INFINITE)
	return name, err == nil && event == syscall.WAIT_OBJECT_0
}
