package lindblad

import (
	"context"
	"fmt"
	"math"
)

// shaped carries a state through a stretch that depends on time. Two methods
// take turns: Taylor's explicit series and, when the generator's fastest
// frequency is far above what the state shows, the two-point series. The one
// that makes more progress per multiplication goes on; the other is tried
// again now and then.
type shaped struct {
	taylor   taylor
	twoPoint twoPoint
	trace    []float64
}

// visitor sees each step before the state moves on: p is the state within it.
type visitor func(from, step float64, p within) error

// within is the state within a step, by the time since its start.
type within interface {
	at(y []float64, tau float64)
	slopeAt(y []float64, tau float64)
}

const (
	tryAgain     = 24 // steps after which the other method is tried
	implicitSize = 64 // largest state for the two-point series
)

// run carries x (1 + k parts) through the stretch, with an error of at most
// accuracy.
func (w *shaped) run(ctx context.Context, l *Layout, f *field, x []float64, k int, lasts, accuracy float64, stats *Stats, visit visitor) error {
	n := l.n
	block := (1 + k) * n
	perTime := accuracy / lasts
	a := &w.taylor
	a.prepare(l, f.stretch, k)
	order := bestOrder(1e-3*accuracy, a.cost)
	b := &w.twoPoint
	b.possible = n <= implicitSize
	if b.possible {
		b.prepare(a, accuracy)
	}
	a.rounded = 0
	w.trace = sized(w.trace, 1+k)
	for q := range w.trace {
		w.trace[q] = l.trace(x[q*n:])
	}
	copy(a.poly.c, x[:block])
	var progress [2]float64 // per multiplication, of the explicit and the implicit method
	costs := [2]float64{a.cost(order), b.cost()}
	limit, last := math.Inf(1), 0.0
	method, since := 0, 0
	have := 0 // order to which the series at t is known
	t := 0.0
	for count := 0; t < lasts; count++ {
		if count%64 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		stop := f.breakAfter(t, lasts)
		rest := stop - t
		trial := method
		wait := tryAgain
		if progress[method] > 3*progress[1-method] {
			wait *= 8
		}
		if b.possible && (since >= wait || count == 1 && last < rest/4) {
			trial, since = 1-method, 0
		}
		since++
		var h float64
		var err error
		var p within
		if trial == 0 {
			if have < order {
				a.coefficients(f, t, order)
				a.expand(&a.poly, order)
			}
			h, err = a.explicit(f, t, limit, rest, 0.3*perTime, stats)
			b.forget()
			p = &a.poly
			limit = 3 * h
			last = h
			progress[0] = h / costs[0]
		} else {
			if have < b.m+1 {
				a.coefficients(f, t, b.m+1)
				a.expand(&a.poly, b.m+1)
			}
			if b.step == 0 {
				b.step = 2 * last
			}
			h, err = b.take(f, t, rest, perTime, stats)
			p = &b.inside
			progress[1] = h / costs[1]
		}
		if err != nil {
			return err
		}
		if !(h > 1e-15*lasts) {
			return fmt.Errorf("lindblad: the step became too small at time %g of a stretch of %g: an envelope is not smooth there or a value is not finite", t, lasts)
		}
		stats.Steps++
		if err := visit(t, h, p); err != nil {
			return err
		}
		if h == rest {
			t = stop
		} else {
			t += h
			if progress[1-trial] > 0 && progress[trial] < progress[1-trial] {
				method = 1 - trial
			} else {
				method = trial
			}
		}
		have = 0
		if trial == 1 && h != rest { // the series at the end is that of the next start
			a.poly, b.ahead = b.ahead, a.poly
			have = b.m + 1
		} else {
			copy(a.poly.c, a.next[:block])
		}
		for q := range w.trace {
			l.setTrace(a.poly.c[q*n:(q+1)*n], w.trace[q])
		}
	}
	copy(x, a.poly.c[:block])
	return nil
}

// endOf is a step's end as seen from within: where a step is cut, an envelope
// may break, and the series of the far side must not be used.
func endOf(t float64, cut bool) float64 {
	if cut {
		return math.Nextafter(t, math.Inf(-1))
	}
	return t
}

// explicit takes a step of Taylor's method of at most limit, cut at longest, from
// the series in w.poly, leaving the state in w.next; it returns the step.
func (w *taylor) explicit(f *field, t, limit, longest, perTime float64, stats *Stats) (float64, error) {
	stats.Products += w.poly.order
	h := math.Min(math.Min(w.step(perTime), limit), longest)
	for tries := 0; ; tries++ {
		w.poly.at(w.next, h)
		w.poly.slopeAt(w.slope, h)
		d := w.defect(f, endOf(t+h, h == longest))
		if d <= perTime*float64(w.poly.order) {
			return h, nil
		}
		if r := w.poly.rounding(h); d <= r {
			w.rounded += r * h / float64(w.poly.order)
			return h, nil
		}
		if tries > 100 {
			return 0, nil
		}
		stats.Rejected++
		h *= 0.7
	}
}

// cost counts the multiplications of one step.
func (w *taylor) cost(order int) float64 {
	rows, entries := 0, 0
	for i := range w.driven {
		rows += len(w.driven[i].rows)
		entries += len(w.driven[i].val)
	}
	p := float64(order)
	return float64(1+w.k) * (p*float64(len(w.vals)+entries+4*w.l.n) + float64(rows)*p*(p+8)/2)
}

// breakAfter returns the first break of an envelope after t, at most end.
func (f *field) breakAfter(t, end float64) float64 {
	for i := range f.stretch.Terms {
		if b, ok := f.stretch.Terms[i].Envelope.(Broken); ok {
			if u := b.NextBreak(t); u > t && u < end {
				end = u
			}
		}
	}
	return end
}
