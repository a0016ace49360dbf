package pulse

import "math"

// Basis expresses shapes through few of them: shapes[i] is the sum over j of coef[i][j] times basis[j]. The levels of a
// code with one pulse have a basis of one shape, and so has a driver's Transition that merely scales a pulse; a driver
// that settles with one time constant has two.
//
// The shapes are vectors of the coefficients of their pieces; a shape that the earlier ones do not give to 1e-13 of its
// largest coefficient joins the basis (Gaussian elimination, each row's largest element its pivot).
func Basis(shapes []Shape) (basis []Shape, coef [][]float64) {
	type kind struct{ from, width, rate, turns float64 }
	column := map[kind]int{}
	rows := make([][]float64, len(shapes))
	for i, s := range shapes {
		for _, p := range s.parts() {
			k := kind{p.from, p.width, p.rate, p.turns}
			c, ok := column[k]
			if !ok {
				c = 4 * len(column)
				column[k] = c
			}
			for len(rows[i]) < c+4 {
				rows[i] = append(rows[i], 0)
			}
			for n, v := range []float64{real(p.c0), imag(p.c0), real(p.c1), imag(p.c1)} {
				rows[i][c+n] += v
			}
		}
	}
	type reduced struct {
		row, of []float64 // row is the sum over j of of[j] times basis[j]
		pivot   int
	}
	var found []reduced
	coef = make([][]float64, len(shapes))
	for i, row := range rows {
		for len(row) < 4*len(column) {
			row = append(row, 0)
		}
		_, size := largest(row)
		c := make([]float64, len(basis), len(basis)+1)
		for _, f := range found {
			k := row[f.pivot] / f.row[f.pivot]
			if k == 0 {
				continue
			}
			for n := range row {
				row[n] -= k * f.row[n]
			}
			for j, of := range f.of {
				c[j] += k * of
			}
		}
		if pivot, left := largest(row); left > 1e-13*size {
			of := append([]float64(nil), c...)
			for j := range of {
				of[j] = -of[j]
			}
			found = append(found, reduced{row: row, of: append(of, 1), pivot: pivot})
			clear(c)
			c = append(c, 1)
			basis = append(basis, shapes[i])
		}
		coef[i] = c
	}
	for i := range coef {
		for len(coef[i]) < len(basis) {
			coef[i] = append(coef[i], 0)
		}
	}
	return basis, coef
}

func largest(row []float64) (at int, size float64) {
	for n, v := range row {
		if a := math.Abs(v); a > size {
			at, size = n, a
		}
	}
	return at, size
}
