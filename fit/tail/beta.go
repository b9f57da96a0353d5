package tail

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// place is where a beta law is cut: what lies below y, with yc = 1-y kept to full digits. With a = +Inf it is the limit, a gamma law
// cut at m, of which it takes what lies above.
type place struct{ a, y, yc, m float64 }

// at is the place of the F law with q and df degrees of freedom cut at x > 0.
func at(x, q, df float64) place {
	if math.IsInf(df, 1) {
		return place{a: df, m: q * x / 2}
	}
	odds := q * x / df
	return place{a: df / 2, y: 1 / (1 + odds), yc: 1 / (1 + 1/odds)}
}

// outer says that the place lies beyond the mean, so that tail is the smaller part or near it.
func (p place) outer(b float64) bool {
	if math.IsInf(p.a, 1) {
		return p.m >= b
	}
	return p.a*p.yc >= b*p.y
}

// logKernel returns the logarithm of
//
//	y^a yc^b / B(a,b),   or   m^b e^-m / Gamma(b),
//
// written as distance from the mode, so that nothing large cancels.
// Source: Loader (2000), Fast and accurate computation of binomial probabilities (from memory), for real a and b.
func (p place) logKernel(b float64) float64 {
	if math.IsInf(p.a, 1) {
		return math.Log(b/(2*math.Pi))/2 - stirling(b) - p.m*excess((b-p.m)/p.m)
	}
	n := p.a + b
	e := math.FMA(p.a, p.yc, -b*p.y)
	return math.Log(b/n*(p.a/(2*math.Pi)))/2 + stirling(n) - stirling(p.a) - stirling(b) -
		n*p.y*excess(e/(n*p.y)) - n*p.yc*excess(-e/(n*p.yc))
}

// growth returns kernel(b+1)/(b+1) over kernel(b)/b.
func (p place) growth(b float64) float64 {
	if math.IsInf(p.a, 1) {
		return p.m / (b + 1)
	}
	return p.yc * (p.a + b) / (b + 1)
}

// tail returns I_y(a,b), or Q(b,m): the kernel times an integral that falls from 1 and holds nothing but exponentials and logarithms. The smaller
// part is the one that is integrated.
func (p place) tail(b float64) float64 {
	kernel := p.logKernel(b)
	if math.IsInf(p.a, 1) {
		if p.outer(b) { // s = m (1+u)
			return math.Exp(kernel) * decay(func(u float64) float64 { return (b-1)*math.Log1p(u) - p.m*u }, 1/p.m, 1)
		}
		return 1 - math.Exp(kernel)*decay(func(u float64) float64 { return -b*u - p.m*math.Expm1(-u) }, 1/b, math.Inf(1)) // s = m e^-u
	}
	a, y, yc := p.a, p.y, p.yc
	inner := !p.outer(b)
	if inner {
		a, b, y, yc = b, a, yc, y
	}
	odds, room := y/yc, -math.Log(y)
	if y > 0.5 {
		room = -math.Log1p(-yc)
	}
	part := math.Exp(kernel) / yc * decay(func(u float64) float64 { return (b-1)*math.Log1p(-odds*math.Expm1(-u)) - a*u }, 1/a, room) // s = y e^-u
	if inner {
		return 1 - part
	}
	return part
}

// Nodes and weights of the 16-point rule of Gauss and Legendre on -1 to 1.
var nodes, weights = func() (x, w [16]float64) {
	quad.Legendre{}.FixedLocations(x[:], w[:], -1, 1)
	return
}()

// decay returns the integral of exp(g) from 0 on, for a g that falls from g(0) = 0, at first over lengths of scale or more, and has its nearest
// singular point at -room; it may hold exp(-u). It ends where exp(g) is below e^-40; no panel is longer than its distance from the singular
// point, nor, near 0, than 4.
func decay(g func(float64) float64, scale, room float64) float64 {
	end, room := scale, math.Min(room, 4)
	for i := 0; g(end) > -40 && i < 1000; i++ {
		end *= 2
	}
	total := 0.0
	for lo := 0.0; lo < end; {
		hi := math.Min(end, lo+math.Min(end/8, lo+room))
		mid, half := (lo+hi)/2, (hi-lo)/2
		sum := 0.0
		for i, x := range nodes {
			sum += weights[i] * math.Exp(g(mid+half*x))
		}
		total += half * sum
		lo = hi
	}
	return total
}

// stirling returns ln Gamma(z) - ((z-1/2) ln z - z + ln(2 pi)/2) for z > 0.
// Source: the series of Stirling, Abramowitz and Stegun (1964), 6.1.41 (from memory; its terms are B_2k/(2k(2k-1) z^(2k-1))).
func stirling(z float64) float64 {
	if z < 10 {
		l, _ := math.Lgamma(z)
		return l - ((z-0.5)*math.Log(z) - z + math.Log(2*math.Pi)/2)
	}
	w := 1 / (z * z)
	return (1.0/12 - w*(1.0/360-w*(1.0/1260-w*(1.0/1680-w*(1.0/1188-w*(691.0/360360-w/156)))))) / z
}

// excess returns (1+u) ln(1+u) - u for u >= -1, with full relative accuracy. About 0, with v = u/(2+u), ln(1+u) = 2(v + v^3/3 + v^5/5 + ...), of which
// the first term less u leaves uv.
func excess(u float64) float64 {
	switch {
	case u <= -1:
		return 1
	case u < -0.5 || u > 1:
		return (1+u)*math.Log1p(u) - u
	}
	v := u / (2 + u)
	power, sum := v, 0.0
	for k := 3.0; ; k += 2 {
		power *= v * v
		next := sum + power/k
		if next == sum {
			return u*v + 2*(1+u)*sum
		}
		sum = next
	}
}
