//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package session

import (
	"context"
	"os"
	"strconv"
	"syscall"
	"time"
)

// parentGone waits until the process that started this one is gone; front ends name it in JPY_PARENT_PID. Without such a
// name it waits for ctx. A kernel that outlives its front end would run for ever.
func parentGone(ctx context.Context) (name string, gone bool) {
	name = os.Getenv("JPY_PARENT_PID")
	pid, err := strconv.Atoi(name)
	if err != nil || pid <= 1 {
		return "", false
	}
	child := os.Getppid() == pid // and not the child of something in between
	tick := time.NewTicker(500 * time.Millisecond)
	defer tick.Stop()
	for {
		// A parent that has died stays a process until its own parent asks for it, so its children are told first.
		if child && os.Getppid() != pid || syscall.Kill(pid, 0) == syscall.ESRCH {
			return name, true
		}
		select {
		case <-tick.C:
		case <-ctx.Done():
			return "", false
		}
	}
}
