package session

import "syscall"

// duplicate makes to another name of the descriptor from. Some architectures of Linux have no dup2.
func duplicate(from, to int) error { return syscall.Dup3(from, to, 0) }
