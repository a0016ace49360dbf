// Package frontends holds no code of the product: its tests drive the installed kernel through real front ends, the
// classic notebook in a browser on the older and the newer server, JupyterLab's client and output area, the terminal
// console, the desktop console, the exporter, and the client library's own conformance suite.
//
// A front end that is missing skips its test and names what to install. Where LINEWRIGHT_FRONTENDS is "require", as in
// CI, it fails instead. A folder that LINEWRIGHT_SCREENSHOTS names receives pictures of what was on the screens.
package frontends
