// Package plotting says what values look like: figures, tables and cards.
//
// [Render] gives the forms of any value that is a cell's last expression. Figures are gonum plots ([Figure] hands the
// plot out) that always come in three forms: SVG with its fonts inside, a PNG picture of twice the nominal size, and a
// picture of characters for terminals. The same figure has the same bytes.
//
// [Spectrum] draws densities and tones, [Waveform] bits and volts, [Of] any gonum plot.
package plotting
