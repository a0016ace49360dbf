// Package batch runs notebooks without a front end: it reads an .ipynb file, executes its code cells in a kernel
// process of their own, over the same protocol as any front end, and writes the executed notebook and a report in
// HTML. It also holds a notebook's stored outputs against those of a new run.
//
// Files are nbformat 4.0 to 4.5 (https://nbformat.readthedocs.io); a file keeps its own minor version and every field
// that this package does not know. The kernel is any program that takes a Jupyter connection file.
package batch
