package tail

import "math"

// MaxNoncentrality is the largest noncentrality that NoncentralF takes; beyond it gives NaN.
const MaxNoncentrality = 1e6

// NoncentralF returns the upper tail probability P(F > x) of the noncentral F law: F = (U/q)/(V/df), U noncentral chi-square with q degrees of
// freedom and noncentrality ncp, V chi-square with df degrees of freedom, independent of U. U is the sum of the squares of q normal variates
// with variance 1 and means whose squares sum to ncp; some authors call half of that the noncentrality. With J Poisson of mean ncp/2
// the probability is
//
//	sum over j of P(J = j) I_{df/(df+qx)}(df/2, q/2+j),
//
// and with df = +Inf that of noncentral chi-square over q. With ncp = 0 it is F(x, q, df).
//
// It is 1 for x <= 0, 0 for x = +Inf, and NaN where an argument is NaN, q or df is not positive, q is infinite, or ncp is outside 0 to
// MaxNoncentrality. Relative error about 1e-13 down to 1e-270, somewhat more beyond ncp = 1e5; below 1e-280 it may be 0. Cost: about
// 10 + 20 sqrt(ncp) terms after one integral, some 15 microseconds for a small ncp.
//
// Source: the mixture is Patnaik (1949), Biometrika 36, 202-232 (from memory). Each incomplete beta follows from the one before by adding a positive
// term (Abramowitz and Stegun 1964, 26.5.16, from memory), so that nothing cancels when the sum runs upward.
func NoncentralF(x, q, df, ncp float64) float64 {
	p, _ := noncentral(x, q, df, ncp)
	return p
}

// noncentral returns the tail probability and -x times its slope.
func noncentral(x, q, df, ncp float64) (p, slope float64) {
	switch {
	case math.IsNaN(x) || !(q > 0) || math.IsInf(q, 1) || !(df > 0) || !(ncp >= 0 && ncp <= MaxNoncentrality):
		return math.NaN(), math.NaN()
	case x <= 0:
		return 1, 0
	case math.IsInf(x, 1):
		return 0, 0
	}
	cut := at(x, q, df)
	switch {
	case math.IsInf(df, 1) && cut.m == 0, !math.IsInf(df, 1) && cut.yc == 0:
		return 1, 0
	case !math.IsInf(df, 1) && cut.y == 0, math.IsInf(cut.m, 1):
		return 0, 0
	}
	if ncp == 0 {
		return cut.tail(q / 2), math.Exp(cut.logKernel(q / 2))
	}
	mean := ncp / 2
	first := firstTerm(cut, q/2, mean)
	b := q/2 + first
	weight := math.Exp(-mean)
	if first > 0 {
		weight = math.Exp(place{a: math.Inf(1), m: mean}.logKernel(first)) / first
	}
	tail, kernel := cut.tail(b), math.Exp(cut.logKernel(b))
	step := kernel / b // what the tail gains from b to b+1
	for j := first; ; j++ {
		p += weight * tail
		slope += weight * step * b
		// The tails that are left are below 1, and their weights fall faster than a geometric series.
		ratio := mean / (j + 2)
		if rest := weight * mean / (j + 1) / (1 - ratio); ratio < 1 && rest <= 1e-17*p {
			break
		}
		tail += step
		step *= cut.growth(b)
		b++
		weight *= mean / (j + 1)
	}
	return math.Min(p, 1), slope
}

// firstTerm returns the j at which the sum starts. The tail grows with j, so what is left out is less than the part of the Poisson weights before j:
// 9 standard deviations below the mean, e^-40.5. Where the kernel underflows it starts later, at the first j of a kernel above e^-650; what is left
// out is then below 1e-280.
func firstTerm(cut place, b, mean float64) float64 {
	lo := math.Max(0, math.Floor(mean-9*math.Sqrt(mean)))
	large := func(j float64) bool { return !cut.outer(b+j) || cut.logKernel(b+j) >= -650 }
	if large(lo) {
		return lo
	}
	hi := math.Ceil(mean + 40*math.Sqrt(mean) + 300) // no weight of 1e-300 beyond
	for hi-lo > 1 {
		mid := math.Floor((lo + hi) / 2)
		if large(mid) {
			hi = mid
		} else {
			lo = mid
		}
	}
	return hi
}

// NoncentralFQuantile returns the x with P(F > x) = p, 0 < p < 1: the critical value of a test of size p. The other arguments and the law are those of
// NoncentralF; where that is NaN, and for p outside 0 to 1, it is NaN. It is +Inf beyond 1e300. Relative error about 1e-13 times p over
// the density of ln F: more where p is close to 1. Cost: about 6 calls of NoncentralF.
func NoncentralFQuantile(p, q, df, ncp float64) float64 {
	if !(p > 0 && p < 1) || math.IsNaN(NoncentralF(1, q, df, ncp)) {
		return math.NaN()
	}
	// Newton steps for ln P(F > x) = ln p in ln x, where the left side is concave; a bracket holds them.
	x, lo, hi, longest := 1+ncp/q, 0.0, math.Inf(1), 2.0
	for range 200 {
		tail, slope := noncentral(x, q, df, ncp)
		if tail > p {
			lo = x
		} else {
			hi = x
		}
		step := math.Log1p((tail-p)/p) * tail / slope
		switch {
		case math.IsNaN(step) || math.Abs(step) > longest:
			step = math.Copysign(longest, tail-p)
			longest *= 2
		case math.Abs(step) <= math.Max(3e-9, 4e-15*tail/slope):
			return x * math.Exp(step) // the next step is the square of this one, or rounding
		}
		x *= math.Exp(step)
		if !(x > lo && x < hi) {
			x = math.Sqrt(lo) * math.Sqrt(hi)
		}
		switch {
		case lo > 1e300:
			return math.Inf(1)
		case hi <= lo*(1+4e-16):
			return lo
		}
		x = math.Min(math.Max(x, 1e-305), 1e305)
	}
	return x
}
