//go:build darwin || freebsd || netbsd || openbsd || dragonfly

package session

import "syscall"

// duplicate makes to another name of the descriptor from.
func duplicate(from, to int) error { return syscall.Dup2(from, to) }
