// Package tail gives tail probabilities and quantiles of t and F that stay right far out.
//
// Numbers go in, probabilities come out; nothing is computed as one minus a distribution function, so a
// probability of 1e-60 keeps its digits. It stands first in the flow and imports nothing of the project.
package tail

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// T returns the two-sided tail probability P(|T| > |t|) of Student's t with df > 0 degrees of freedom,
//
//	I_{df/(df+t^2)}(df/2, 1/2).
//
// It is NaN for a NaN argument or df <= 0, and 0 for an infinite t.
// Source: Abramowitz and Stegun (1964), Handbook of Mathematical Functions, 26.7.1 with 26.5.27 (from memory).
func T(t, df float64) float64 {
	switch {
	case math.IsNaN(t) || math.IsNaN(df) || df <= 0:
		return math.NaN()
	case math.IsInf(t, 0):
		return 0
	case math.IsInf(df, 1):
		return math.Erfc(math.Abs(t) / math.Sqrt2)
	}
	return mathext.RegIncBeta(df/2, 0.5, df/(df+t*t))
}

// F returns the upper tail probability P(F > f) of the F law with d1 and d2 degrees of freedom,
//
//	I_{d2/(d2+d1 f)}(d2/2, d1/2).
//
// It is 1 for f <= 0 and NaN where an argument is NaN or a degree of freedom is not positive.
func F(f, d1, d2 float64) float64 {
	switch {
	case math.IsNaN(f) || math.IsNaN(d1) || math.IsNaN(d2) || d1 <= 0 || d2 <= 0:
		return math.NaN()
	case f <= 0:
		return 1
	case math.IsInf(f, 1):
		return 0
	}
	return mathext.RegIncBeta(d2/2, d1/2, d2/(d2+d1*f))
}

// TQuantile returns the t such that P(|T| <= t) = level with df degrees of freedom, 0 < level < 1: the factor of a
// two-sided interval. It is NaN for df <= 0. It is found by bisection and Newton steps on T, to 14 digits.
func TQuantile(level, df float64) float64 {
	if !(level > 0 && level < 1) || math.IsNaN(df) || df <= 0 {
		return math.NaN()
	}
	alpha := 1 - level
	lo, hi := 0.0, 1.0
	for T(hi, df) > alpha {
		lo = hi
		hi *= 2
		if hi > 1e300 {
			return math.Inf(1)
		}
	}
	for i := 0; i < 200 && hi-lo > 1e-15*hi; i++ {
		mid := lo + (hi-lo)/2
		if T(mid, df) > alpha {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo + (hi-lo)/2
}
