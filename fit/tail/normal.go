package tail

import "math"

// rootHalfRest is the root of one half less its float64; both from 60 digits of it.
const (
	rootHalf     = 0.70710678118654752440084436210484903928483593768847403658834
	rootHalfRest = rootHalf - 0x1.6a09e667f3bcdp-1
)

// Normal returns the distribution function P(Z <= z) of the standard normal law,
//
//	erfc(-z/sqrt 2) / 2.
//
// The upper tail is Normal(-z), the two-sided one T(z, +Inf). Relative error about 1e-15 down to z = -37.5, where the values end to be
// normal numbers; below -38.6 it is 0. The rounding of z/sqrt 2, which counts z^2 times in the tail, is put right to first order.
// Source: Abramowitz and Stegun (1964), Handbook of Mathematical Functions, 26.2.29 (from memory).
func Normal(z float64) float64 {
	u := -z * rootHalf
	p := math.Erfc(u) / 2
	if !(u > 1) || p == 0 {
		return p
	}
	rest := math.FMA(-z, rootHalf, -u) - z*rootHalfRest
	return p - rest*math.Exp(-u*u)/math.SqrtPi
}

// NormalQuantile returns the z with P(Z <= z) = p, 0 < p < 1, and NaN outside. A small p gives z to about 1e-15 of it down to p = 1e-307, and
// to a few digits below; close to 1, p itself has few digits: take -NormalQuantile of the upper tail. It is found by Newton steps on the logarithm of Normal.
func NormalQuantile(p float64) float64 {
	switch {
	case !(p > 0 && p < 1):
		return math.NaN()
	case p > 0.5:
		return -NormalQuantile(1 - p) // 1-p is exact here
	}
	z := math.Sqrt2 * math.Erfinv(2*p-1)
	if p < 1e-5 {
		// The tail is close to exp(-z^2/2) / (|z| sqrt(2 pi)).
		l := -2 * math.Log(p)
		z = -math.Sqrt(l - math.Log(2*math.Pi*(l-math.Log(2*math.Pi*l))))
	}
	for range 20 {
		at := Normal(z)
		if at == 0 {
			break
		}
		density := math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
		step := math.Log1p((at-p)/p) * at / density
		z -= step
		if !(math.Abs(step) > 1e-9*math.Abs(z)) {
			break // the next step is the square of this one
		}
	}
	return z
}
