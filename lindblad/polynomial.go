package lindblad

// polynomial is Σ c_p (τ/scale)^p, the state within one step; c_p are blocks.
type polynomial struct {
	c     []float64
	block int
	order int
	scale float64
}

func (p *polynomial) reset(block, order int) {
	p.block, p.order, p.scale = block, order, 1
	p.c = sized(p.c, (order+1)*block)
}

// part returns part q of coefficient i, n numbers.
func (p *polynomial) part(i, q, n int) []float64 {
	return p.c[i*p.block+q*n:][:n]
}

// at evaluates the polynomial at τ, four orders at a time.
func (p *polynomial) at(y []float64, tau float64) {
	u := tau / p.scale
	n := p.block
	y = y[:n]
	i := p.order
	copy(y, p.c[i*n:])
	for ; i >= 4; i -= 4 {
		a, b := p.c[(i-1)*n:][:len(y)], p.c[(i-2)*n:][:len(y)]
		c, d := p.c[(i-3)*n:][:len(y)], p.c[(i-4)*n:][:len(y)]
		for j, v := range y {
			y[j] = (((v*u+a[j])*u+b[j])*u+c[j])*u + d[j]
		}
	}
	for ; i >= 1; i-- {
		c := p.c[(i-1)*n:][:len(y)]
		for j, v := range c {
			y[j] = y[j]*u + v
		}
	}
}

// slopeAt evaluates its derivative by time.
func (p *polynomial) slopeAt(y []float64, tau float64) {
	u := tau / p.scale
	y = y[:p.block]
	for j, v := range p.c[p.order*p.block:][:len(y)] {
		y[j] = v * float64(p.order) / p.scale
	}
	for i := p.order - 1; i >= 1; i-- {
		c := p.c[i*p.block:][:len(y)]
		f := float64(i) / p.scale
		for j, v := range c {
			y[j] = y[j]*u + f*v
		}
	}
}

// rounding is what rounding may leave in the derivative at τ.
func (p *polynomial) rounding(tau float64) float64 {
	var sum float64
	power := 1.0
	for i := 1; i <= p.order; i++ {
		sum += power * float64(i) * largest(p.c[i*p.block:(i+1)*p.block])
		power *= tau
	}
	return 2e-15 * sum
}
