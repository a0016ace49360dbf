// Package session turns the requests of front ends into cells, and what cells do into replies and broadcasts. It is the
// kernel between the sockets of package wire and the interpreter of package cell. [Serve] runs one.
//
//   - serve.go: the process around a kernel: descriptors, signals, parent, crash file
//   - kernel.go, requests.go: channels and the table of requests
//   - execute.go, output.go, record.go, ask.go, bundle.go: a cell and what it puts out
//   - history.go: what was run
//   - space.go: memory for cells that run long, and its return
//
// # What runs where
//
// Cells run one at a time, in the order of their requests, in one goroutine. Everything else that comes on shell is
// answered at once by another, so that completion and inspection work while a cell runs, and what comes on control by a
// third, so that an interrupt is never behind anything. Every request is answered with busy, its work, the reply and
// idle, once each.
//
// # Output
//
// Text of a cell is collected and sent after 50 ms, or at 64 kB (512 kB where much comes fast), and before anything else
// of the same cell is sent; a character is never cut. Each cell has an output of its own, which carries the request that started it, so goroutines
// that outlive their cell go on writing under it. What is written to the standard output and error of the process
// (os.Stdout, package log, compiled code) belongs to the cell that runs or ran last.
//
// Of one cell, 64 MB of text are sent. What comes after that is only in a file, and the cell says in which.
package session
