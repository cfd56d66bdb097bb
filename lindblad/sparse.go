package lindblad

// longRow is the number of entries from which rows are summed in a loop.
const longRow = 7

// times sets y = Lx for a generator on the pattern. Rows of equal length are
// taken together, so that nothing has to be guessed.
func (l *Layout) times(y, vals, x []float64) {
	for _, i := range l.rows[0] {
		y[i] = 0
	}
	for _, i := range l.rows[1] {
		e := l.start[i]
		y[i] = vals[e] * x[l.col[e]]
	}
	for _, i := range l.rows[2] {
		e := l.start[i]
		v, c := (*[2]float64)(vals[e:]), (*[2]int32)(l.col[e:])
		y[i] = v[0]*x[c[0]] + v[1]*x[c[1]]
	}
	for _, i := range l.rows[3] {
		e := l.start[i]
		v, c := (*[3]float64)(vals[e:]), (*[3]int32)(l.col[e:])
		y[i] = v[0]*x[c[0]] + v[1]*x[c[1]] + v[2]*x[c[2]]
	}
	for _, i := range l.rows[4] {
		e := l.start[i]
		v, c := (*[4]float64)(vals[e:]), (*[4]int32)(l.col[e:])
		y[i] = (v[0]*x[c[0]] + v[1]*x[c[1]]) + (v[2]*x[c[2]] + v[3]*x[c[3]])
	}
	for _, i := range l.rows[5] {
		e := l.start[i]
		v, c := (*[5]float64)(vals[e:]), (*[5]int32)(l.col[e:])
		y[i] = (v[0]*x[c[0]] + v[1]*x[c[1]]) + (v[2]*x[c[2]] + v[3]*x[c[3]]) + v[4]*x[c[4]]
	}
	for _, i := range l.rows[6] {
		e := l.start[i]
		v, c := (*[6]float64)(vals[e:]), (*[6]int32)(l.col[e:])
		y[i] = (v[0]*x[c[0]] + v[1]*x[c[1]]) + (v[2]*x[c[2]] + v[3]*x[c[3]]) + (v[4]*x[c[4]] + v[5]*x[c[5]])
	}
	for _, i := range l.rows[longRow] {
		from, to := l.start[i], l.start[i+1]
		v := vals[from:to]
		c := l.col[from:to][:len(v)]
		var s, t float64
		e := 0
		for ; e+1 < len(v); e += 2 {
			s += v[e] * x[c[e]]
			t += v[e+1] * x[c[e+1]]
		}
		if e < len(v) {
			s += v[e] * x[c[e]]
		}
		y[i] = s + t
	}
}

// addTimes sets y += Lx.
func (l *Layout) addTimes(y, vals, x []float64) {
	for i := 0; i < l.n; i++ {
		var s float64
		for e := l.start[i]; e < l.start[i+1]; e++ {
			s += vals[e] * x[l.col[e]]
		}
		y[i] += s
	}
}

// timesPattern sets c = a·b with derivatives, a on the pattern: vals holds its
// entries, those of its derivatives after them.
func (c *full) timesPattern(l *Layout, vals []float64, b *full) {
	for i := range c.lo {
		lo, hi := b.lo[i], b.hi[i] // higher powers fill no less
		for r := 4 * i; r < min(4*i+4, c.n); r++ {
			for _, k := range l.col[l.start[r]:l.start[r+1]] {
				lo, hi = min(lo, b.lo[k/4]), max(hi, b.hi[k/4])
			}
		}
		c.lo[i], c.hi[i] = lo, hi
		for q := 0; q <= c.k; q++ {
			z := c.part(q)
			for r := 4 * i; r < 4*i+4; r++ {
				clear(z[r*c.m+int(lo) : r*c.m+int(hi)])
			}
		}
	}
	entries := len(l.col)
	for q := 0; q <= c.k; q++ {
		z, y := c.part(q), b.part(q)
		for r := 0; r < c.n; r++ {
			for e := l.start[r]; e < l.start[r+1]; e++ {
				k := l.col[e]
				plus(z[r*c.m:], y[int(k)*b.m:], vals[e], b.lo[k/4], b.hi[k/4])
				if q > 0 {
					plus(z[r*c.m:], b.part(0)[int(k)*b.m:], vals[q*entries+int(e)], b.lo[k/4], b.hi[k/4])
				}
			}
		}
	}
}
