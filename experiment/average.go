package experiment

import (
	"context"
	"fmt"
	"math"

	"rhotrace/lindblad"
)

// The average over a Gaussian spread is the trapezoidal rule in z, the dial's
// deviation over sigma: for smooth functions times e^{−z²/2} its error falls
// faster than exponentially with the step (L. N. Trefethen, J. A. C. Weideman,
// SIAM Review 56, 385 (2014)). Steps shrink by the golden ratio until nothing
// changes: two steps with an irrational ratio cannot both sit on the same
// alias of a fast fringe, which a halved step can.

const (
	goldenStep  = 0.6180339887498949
	mostSpread  = 20000 // nodes for one spread
	mostAverage = 5e6   // shots for one point
)

// nodes are deviates and their weights, which sum to one.
type nodes struct{ z, w []float64 }

func gaussianNodes(level int, accuracy float64) nodes {
	h := math.Pow(goldenStep, float64(level))
	n := int(math.Ceil(tail(accuracy/10) / h))
	var out nodes
	sum := 0.0
	for k := -n; k <= n; k++ {
		z := float64(k) * h
		w := math.Exp(-z * z / 2)
		out.z, out.w = append(out.z, z), append(out.w, w)
		sum += w
	}
	for i := range out.w {
		out.w[i] /= sum
	}
	return out
}

// tail is the z beyond which both tails together hold p.
func tail(p float64) float64 { return math.Sqrt2 * math.Erfcinv(p) }

// spreadPoint averages one point over the spreads that are wider than zero.
func (v *evaluator) spreadPoint(ctx context.Context, values []float64, record lindblad.Record, samples int) (*states, error) {
	if err := v.settler.settle(values, none, nil); err != nil {
		return nil, v.place(err)
	}
	active := v.e.widths(v.settler.x)
	lasts := v.nominal(values)
	levels := make([]int, len(active))
	now, err := v.average(ctx, values, record, samples, active, levels)
	if err != nil {
		return nil, err
	}
	for refined := len(active) > 0; refined; {
		refined = false
		for i := range active {
			for {
				levels[i]++
				next, err := v.average(ctx, values, record, samples, active, levels)
				if err != nil {
					return nil, err
				}
				change := difference(now, next)
				now = next
				if change <= v.accuracy/20 { // spare room for kinks, where a sample crosses the end of a step
					break
				}
				refined = refined || len(active) > 1
			}
		}
	}
	now.lasts = lasts
	return now, nil
}

// nominal is the recorded time of the central shot. The settler holds it.
func (v *evaluator) nominal(values []float64) float64 {
	s := newStates(0, 0, len(v.directions))
	for i := range v.e.shape.steps {
		if v.used[i] {
			v.fill(i, -1, v.settler.x)
		}
	}
	v.recorded(-1, values, 1, s)
	return s.lasts
}

func difference(a, b *states) (largest float64) {
	for k := range a.values {
		for c := range a.values[k] {
			scale := math.Max(1, math.Abs(b.values[k][c])) // photons are not bounded by one
			largest = math.Max(largest, math.Abs(a.values[k][c]-b.values[k][c])/scale)
		}
	}
	return largest
}

func (v *evaluator) average(ctx context.Context, values []float64, record lindblad.Record, samples int, active, levels []int) (*states, error) {
	s := v.e.shape
	rules := make([]nodes, len(active))
	shots := 1.0
	for i := range active {
		rules[i] = gaussianNodes(levels[i], v.accuracy)
		if n := len(rules[i].z); n > mostSpread {
			return nil, fmt.Errorf("%s: %s: the average does not settle with %d nodes: the state turns too often across the spread, or is not smooth along it; narrow the spread or raise accuracy",
				s.file, joinKey("spread", s.spreads[active[i]].name), n)
		}
		shots *= float64(len(rules[i].z))
	}
	if shots > mostAverage {
		return nil, &Error{File: s.file, Path: "spread", What: fmt.Sprintf("the spreads together need %.2g shots for one point, more than %.2g; raise accuracy or take a spread out", shots, mostAverage)}
	}
	out := newStates(samples, v.columns, len(v.directions))
	z := make([]float64, len(s.spreads))
	at := make([]int, len(active))
	kept, lost := 0.0, 0.0
	var outside *settleError
	for {
		weight := 1.0
		for i, sp := range active {
			z[sp] = rules[i].z[at[i]]
			weight *= rules[i].w[at[i]]
		}
		switch err := v.shot(ctx, values, z, weight, record, out).(type) {
		case nil:
			kept += weight
		case *settleError:
			lost += weight
			outside = err
		default:
			return nil, err
		}
		if !advance(at, rules) {
			break
		}
	}
	if lost > v.accuracy {
		return nil, &Error{File: s.file, What: fmt.Sprintf("%s: that is so in a share %.2g of the shots; narrow the spread", outside, lost)}
	}
	out.scale(1 / kept)
	return out, nil
}

// advance steps a multi-index; the last one is fastest.
func advance(at []int, rules []nodes) bool {
	for i := len(at) - 1; i >= 0; i-- {
		if at[i]++; at[i] < len(rules[i].z) {
			return true
		}
		at[i] = 0
	}
	return false
}

func (s *states) scale(f float64) {
	for _, row := range s.values {
		for c := range row {
			row[c] *= f
		}
	}
	for j := range s.slopes {
		for _, row := range s.slopes[j] {
			for c := range row {
				row[c] *= f
			}
		}
		s.dlasts[j] *= f
	}
	s.lasts *= f
}
