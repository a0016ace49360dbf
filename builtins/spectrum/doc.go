// Package spectrum computes the power spectra of coded pulse trains exactly: the continuous density and the tones, from
// the encoder's graph and the statistics of its data, without simulation.
//
// # Conventions
//
// Densities are one-sided, in V^2/Hz over f >= 0 in Hz, and do not contain the tones. Tones are in V^2; the tone at 0 Hz
// has the power of the mean, squared. Density and tones add up to the mean square of the waveform. A tone with less
// than 1e-14 of the mean square is none: it stands on a null of the pulse and is there by rounding only.
//
// # Method
//
// A code fed by a model of its data is a Markov chain whose edges emit symbols (linecode.Chain). The chain is brought to
// steps of equal length (unit.go), split into the classes it may end in (classes.go), and reduced (lump.go). The
// waveform of a symbol is a sum of few basis shapes, so a class is a vector process c(t) on the symbol clock, whose
// part that repeats with the chain's period gives the tones (tones.go) and whose rest gives the density
//
//	S(f) = T sum over i, j of conj(H_i) H_j sum over l of R_ij(l) exp(-2 pi j nu l),   nu = f T,
//
// with R the autocovariance (autocorr.go, form.go). Short memories are summed lag by lag; a process of small rank is a
// ratio of two short series (rational.go); other long memories end in a resolvent on the directions that are left
// (resolvent.go). Where the density vanishes at 0 Hz the process is replaced by its running sums, which keeps the digits
// (null.go). Data that repeat give tones only (periodic.go, dft.go). Bands are integrated by Gauss rules whose sum is
// held against the mean square of the time domain (power.go).
//
// Sources: W. R. Bennett, "Statistics of regenerative digital transmission", Bell Syst. Tech. J. 37 (1958) 1501-1542;
// G. L. Cariolaro and G. P. Tronca, "Spectra of block coded digital signals", IEEE Trans. Commun. COM-22 (1974)
// 1555-1564; G. L. Cariolaro, G. L. Pierobon and S. G. Pupolin, "Spectral analysis of variable-length coded digital
// signals", IEEE Trans. Inform. Theory IT-28 (1982) 473-481 (all from memory). The treatment of periodic chains by
// cyclic means, and of nulls by running sums, is derived in the files that do it.
package spectrum
