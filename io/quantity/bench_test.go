package quantity

import "testing"

func BenchmarkParse(b *testing.B) {
	for _, c := range []struct {
		name, text string
		d          Dimension
	}{{"decimal", "12.5 kHz", Frequency}, {"angle", "54.7356 deg", Angle}, {"quotient", "575 Hz/G^2", Per(Frequency, Field, 2)}} {
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				if _, err := Parse(c.text, c.d); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
	b.Run("refused", func(b *testing.B) {
		for b.Loop() {
			if _, err := Parse("12.5 kHz", Time); err == nil {
				b.Fatal("kHz was read as a time")
			}
		}
	})
}

func BenchmarkFormat(b *testing.B) {
	for _, c := range []struct {
		name string
		v    float64
		d    Dimension
	}{{"decimal", 12500, Frequency}, {"degrees", 0.9553166181245093, Angle}, {"quotient", 575e8, Per(Frequency, Field, 2)}} {
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				Format(c.v, c.d)
			}
		})
	}
}
