package figure_test

import (
	"io"
	"math"
	"testing"

	"rhotrace/io/figure"
)

// BenchmarkWrite measures a curve of 401 points and a map of 101 × 41 cells.
func BenchmarkWrite(b *testing.B) {
	var line figure.Line
	for i := range 401 {
		line.X = append(line.X, 25e-6*float64(i))
		line.Y = append(line.Y, math.Sin(float64(i)/20))
	}
	m := &figure.Map{X: make([]float64, 101), Y: make([]float64, 41), Values: make([][]float64, 101)}
	for i := range m.X {
		m.X[i], m.Values[i] = float64(i), make([]float64, 41)
		for j := range m.Y {
			m.Y[j], m.Values[i][j] = float64(j), float64(i*j)
		}
	}
	for name, panel := range map[string]figure.Panel{"curve": {Lines: []figure.Line{line}}, "map": {Map: m}} {
		f := figure.Figure{Panels: []figure.Panel{panel}}
		for _, format := range figure.Formats {
			b.Run(name+"/"+format, func(b *testing.B) {
				for range b.N {
					if err := f.Write(io.Discard, format); err != nil {
						b.Fatal(err)
					}
				}
			})
		}
	}
}
