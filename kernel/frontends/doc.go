// Package frontends holds no code of the product: its tests drive the installed kernel through real front ends, the
// classic notebook in a browser, the terminal console, the exporter, and the client library's own conformance suite.
//
// A front end that is missing skips its test and names the packages to install. Where LINEWRIGHT_FRONTENDS is
// "require", as in CI, it fails instead.
package frontends
