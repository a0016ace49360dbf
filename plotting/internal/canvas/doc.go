// Package canvas has the surfaces that figures are drawn on: an SVG document with its fonts inside ([SVG]), a raster
// picture ([PNG]) and the characters of a terminal ([Terminal]). Each is a vg.Canvas of gonum's plotting packages.
package canvas
