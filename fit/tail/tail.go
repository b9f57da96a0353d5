// Package tail gives tail probabilities and quantiles of the normal law, t, F and noncentral F that stay right far out.
//
// Numbers go in, probabilities come out; nothing small is computed as one minus a distribution function, so a
// probability of 1e-60 keeps its digits, with 20 million degrees of freedom as with 5. What is impossible gives NaN.
// It stands first in the flow and imports nothing of the project.
package tail

import "math"

// T returns the two-sided tail probability P(|T| > |t|) of Student's t with df > 0 degrees of freedom, +Inf included,
//
//	I_{df/(df+t^2)}(df/2, 1/2).
//
// It is NaN for a NaN argument or df <= 0, and 0 for a t beyond 1e154. Relative error about 1e-14, far out 1e-13, down to 1e-280; below, it may be 0.
// Source: Abramowitz and Stegun (1964), Handbook of Mathematical Functions, 26.7.1 with 26.5.27 (from memory).
func T(t, df float64) float64 {
	switch {
	case math.IsNaN(t) || math.IsNaN(df) || df <= 0:
		return math.NaN()
	case math.IsInf(df, 1):
		return 2 * Normal(-math.Abs(t))
	}
	return F(t*t, 1, df)
}

// F returns the upper tail probability P(F > f) of the F law with d1 and d2 degrees of freedom,
//
//	I_{d2/(d2+d1 f)}(d2/2, d1/2),
//
// or with d2 = +Inf that of chi-square with d1 degrees of freedom over d1.
// It is 1 for f <= 0 and NaN where an argument is NaN, a degree of freedom is not positive or d1 is infinite. Relative error about
// 1e-14, far out 1e-13, down to 1e-280; below, it may be 0.
func F(f, d1, d2 float64) float64 {
	return NoncentralF(f, d1, d2, 0)
}

// TQuantile returns the t such that P(|T| <= t) = level with df degrees of freedom, +Inf included, 0 < level < 1: the factor of a
// two-sided interval. It is NaN for df <= 0 and +Inf beyond 1e150. It is the root of the upper quantile of F with 1 and df degrees
// of freedom, to 14 digits of 1 - level.
func TQuantile(level, df float64) float64 {
	if !(level > 0 && level < 1) {
		return math.NaN()
	}
	return math.Sqrt(NoncentralFQuantile(1-level, 1, df, 0))
}
