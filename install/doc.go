// Package install registers Linewright with Jupyter front ends: it writes the kernelspec, the folder of that name in
// which a front end finds how to start the kernel and which logo to show.
//
// The folder holds a copy of the program beside the kernelspec, so that a registration made from a build that does not
// last (as with go run) lasts. Places are those of Jupyter's own search path, documented under "Common Directories and
// File Locations" of the Jupyter project and under "Kernel specs" of its client library.
package install

//go:generate go run ./drawlogo
