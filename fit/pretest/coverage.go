// Package pretest says what it costs to choose between a long and a short model after looking at the data, and how large an effect must be before
// giving it up does harm.
//
// A correlation, a cut-off, an F statistic or a pair of variances goes in; a coverage probability, critical values or a break-even comes
// out. It knows no data. It refuses nothing with an error: what is impossible gives NaN. It stands after tail and before remedy.
package pretest

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/integrate/quad"

	"modelmend/fit/tail"
)

// Coverage returns the probability that the nominal interval of a focal coefficient covers it when a second regressor is kept if its |t| exceeds cut and
// dropped otherwise, and the interval of the model so chosen is taken at face value.
//
// r, strictly between -1 and 1, is the correlation of the two regressors, or, with further regressors in both models, minus the correlation of the two
// estimates in the long model. delta is the dropped regressor's true coefficient over the standard deviation of its estimate in the long
// model: its true t. cut >= 0, +Inf included, is the cut-off for |t|; level is the nominal level, 0 < level < 1. None has a unit. Errors
// are normal and their variance is known: with few degrees of freedom the probability is another one, close by.
//
// Derivation. Write z for the error of the long model's estimate b1 over its standard deviation sd1, and t for the second regressor's
// estimate over its own: t = delta + w, where z and w are standard normal with correlation -r. Let s = sqrt(1-r^2) and let c be the normal
// factor of the interval, P(|Z| <= c) = level. Given w, z is normal with mean -rw and standard deviation s, so the long interval, |z| <= c, covers
// with probability
//
//	G(w) = Phi((c+rw)/s) - Phi((-c+rw)/s).
//
// The short model's estimate is b1 + r sd1 t, since that takes out all of b1 that goes with t; its standard deviation is s sd1. Its
// error over that is (z+rw)/s + m with m = r delta/s. As z+rw has no correlation with w, it is independent of t, so that
// the short interval covers with probability Phi(c-m) - Phi(-c-m) whatever t was. In all, with phi the normal density,
//
//	P(|t| <= cut) [Phi(c-m) - Phi(-c-m)]  +  integral over |delta+w| > cut of phi(w) G(w) dw.
//
// It depends on r and delta by their absolute values, is exactly level for r = 0 or cut = 0, and tends to level as delta grows. It is NaN
// where an argument is NaN or out of range. Absolute error about 1e-15. Cost: one integral over at most some 40 panels, 30 to 70 microseconds.
//
// Source: derived here. The problem is that of Leeb and Potscher (2005), Econometric Theory 21, 21-59 (from memory).
func Coverage(r, delta, cut, level float64) float64 {
	d, ok := newDesign(r, cut, level)
	if !ok || math.IsNaN(delta) {
		return math.NaN()
	}
	return d.coverage(math.Abs(delta))
}

// WorstCoverage returns the minimum of Coverage over delta >= 0, and the delta where it is reached; of several the one found at the smallest
// delta. Where nothing is ever lost, r = 0 or cut = 0, it is level at delta 0; with cut = +Inf it is 0 at delta = +Inf. Arguments and NaN are those
// of Coverage. The coverage is as exact as there; delta is to about 1e-8, less where the coverage is flat. It is found from the closed form of
// Coverage's derivative in delta, searched for changes of sign on a grid that is close where coverage can change. Cost: about 300
// evaluations of that form and a few integrals, under a millisecond.
func WorstCoverage(r, cut, level float64) (coverage, delta float64) {
	d, ok := newDesign(r, cut, level)
	switch {
	case !ok:
		return math.NaN(), math.NaN()
	case d.r == 0 || cut == 0:
		return level, 0
	case math.IsInf(cut, 1):
		return 0, math.Inf(1)
	}
	coverage = d.coverage(0)
	last := 0.0
	falling := true // at 0 the derivative is 0
	for _, next := range d.grid() {
		now := d.slope(next) < 0
		if falling && !now {
			if at := d.turn(last, next); at > 0 {
				if c := d.coverage(at); c < coverage {
					coverage, delta = c, at
				}
			}
		}
		last, falling = next, now
	}
	return coverage, delta
}

// design is what Coverage needs beside delta.
type design struct {
	r, s  float64 // |r| and sqrt(1-r^2)
	cut   float64
	level float64
	c     float64 // normal factor of the interval
}

func newDesign(r, cut, level float64) (design, bool) {
	if !(r > -1 && r < 1) || !(cut >= 0) || !(level > 0 && level < 1) {
		return design{}, false
	}
	return design{math.Abs(r), math.Sqrt((1 - r) * (1 + r)), cut, level, -tail.NormalQuantile((1 - level) / 2)}, true
}

func (d design) coverage(delta float64) float64 {
	switch {
	case d.r == 0 || d.cut == 0:
		return d.level
	case math.IsInf(delta, 1) && math.IsInf(d.cut, 1):
		return 0
	case math.IsInf(delta, 1):
		return d.level
	}
	m := d.r * delta / d.s
	dropped := between(-d.cut-delta, d.cut-delta) * between(-d.c-m, d.c-m)
	if math.IsInf(d.cut, 1) {
		return dropped
	}
	end := math.Min(9, d.c/d.r+9*d.s/d.r) // beyond it phi or G is below 1e-18
	return math.Min(1, dropped+d.integral(-end, -d.cut-delta)+d.integral(d.cut-delta, end))
}

// density is phi(w) G(w).
func (d design) density(w float64) float64 {
	return normalDensity(w) * between((-d.c+d.r*w)/d.s, (d.c+d.r*w)/d.s)
}

// integral is that of density from lo to hi. G turns at -c/r and c/r over lengths of s/r: panels end there, are at most twice that long near by, and
// at most 1.5 long anywhere.
func (d design) integral(lo, hi float64) float64 {
	lo, hi = math.Max(lo, -10), math.Min(hi, 10)
	if !(lo < hi) {
		return 0
	}
	ends := []float64{lo, hi}
	for _, turn := range []float64{-d.c / d.r, d.c / d.r} {
		for k := -8.0; k <= 8; k += 2 {
			if at := turn + k*d.s/d.r; at > lo && at < hi {
				ends = append(ends, at)
			}
		}
	}
	sort.Float64s(ends)
	total := 0.0
	for i, from := range ends[:len(ends)-1] {
		parts := math.Ceil((ends[i+1] - from) / 1.5)
		half := (ends[i+1] - from) / parts / 2
		for k := range int(parts) {
			mid, sum := from+half*float64(2*k+1), 0.0
			for j, x := range nodes {
				sum += weights[j] * d.density(mid+half*x)
			}
			total += half * sum
		}
	}
	return total
}

// slope is the derivative of coverage in delta: that of the product, and what the moving ends of the integral gain and lose.
func (d design) slope(delta float64) float64 {
	m := d.r * delta / d.s
	return (normalDensity(d.cut+delta)-normalDensity(d.cut-delta))*between(-d.c-m, d.c-m) +
		between(-d.cut-delta, d.cut-delta)*d.r/d.s*(normalDensity(d.c+m)-normalDensity(d.c-m)) +
		d.density(d.cut-delta) - d.density(d.cut+delta)
}

// grid holds the deltas, rising, between which slope is searched for a change of sign: by equal factors from well below the length over which the short
// interval loses its truth to where the second regressor is always kept, and close where an end of the integral passes a turn of G.
func (d design) grid() []float64 {
	const count = 240
	h := d.s / d.r
	first, last := 1e-3*math.Min(1, h), d.cut+10
	points := make([]float64, 0, count+40)
	for i := range count + 1 {
		points = append(points, first*math.Pow(last/first, float64(i)/count))
	}
	for _, at := range []float64{d.cut - d.c/d.r, d.c/d.r - d.cut, d.cut + d.c/d.r} {
		for k := -4.0; k <= 4; k++ {
			if p := at + k*h; p > first && p < last {
				points = append(points, p)
			}
		}
	}
	sort.Float64s(points)
	return points
}

// turn is the first point between lo and hi, to rounding, where slope is not negative.
func (d design) turn(lo, hi float64) float64 {
	for range 60 {
		mid := lo + (hi-lo)/2
		if !(mid > lo && mid < hi) {
			break
		}
		if d.slope(mid) < 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo
}

func normalDensity(w float64) float64 { return math.Exp(-w*w/2) / math.Sqrt(2*math.Pi) }

// between is P(lo < Z <= hi), lo <= hi, from the tails on the side where both are small.
func between(lo, hi float64) float64 {
	if lo > 0 {
		return tail.Normal(-lo) - tail.Normal(-hi)
	}
	return tail.Normal(hi) - tail.Normal(lo)
}

// Nodes and weights of the 16-point rule of Gauss and Legendre on -1 to 1.
var nodes, weights = func() (x, w [16]float64) {
	quad.Legendre{}.FixedLocations(x[:], w[:], -1, 1)
	return
}()
