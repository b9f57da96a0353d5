package pretest

import (
	"math"

	"modelmend/fit/tail"
)

// Criterion is one hypothesis about q linear restrictions, put as the largest noncentrality that it allows, and the F statistic held against it.
type Criterion struct {
	Noncentrality float64 // squared discrepancies of the restrictions, in the metric of their estimates' covariance matrix; no unit
	Critical      float64 // the hypothesis is rejected where F exceeds this
	P             float64 // the largest probability, under the hypothesis, of an F beyond the one seen
}

// Criteria are three hypotheses about the same restrictions, each weaker than the one before where q > 1; Strong and SecondWeak are one where q = 1.
type Criteria struct {
	Exact      Criterion // they are true
	Strong     Criterion // every linear combination of coefficients has a mean squared error with them no larger than without
	SecondWeak Criterion // the fitted values of the sample have a summed mean squared error with them no larger than without
}

// MeanSquaredError holds the F statistic of q linear restrictions, f >= 0 with q and df degrees of freedom (df = +Inf for a known variance), against three
// hypotheses, at a test of the given size, 0 < size < 1.
//
// With R beta = r the restrictions, b least squares, V the covariance matrix of Rb and d = R beta - r, F is noncentral with noncentrality
// ncp = d'V^-1 d. The strong criterion holds exactly if ncp <= 1, the second weak one if ncp <= q: restricted least squares takes
// q sigma^2 off the summed variance of the fitted values and adds ncp sigma^2 of squared bias. (Sources that call half of ncp the noncentrality write
// 1/2 and q/2.) The tail probability rises with ncp, so the critical value is the quantile at the largest ncp allowed, and P the tail
// there. Not rejecting is not evidence that restricting helps. The first weak criterion is left out: its mark depends on the design.
//
// P is NaN for a negative or NaN f; all is NaN where q, df or size is impossible or q > tail.MaxNoncentrality. Accuracy and cost are those of
// tail.NoncentralFQuantile, three times.
//
// Source: Toro-Vizcarrondo and Wallace (1968), Journal of the American Statistical Association 63, 558-572, for the strong criterion;
// Wallace (1972), Econometrica 40, 689-698, for the weak ones (pages from memory).
func MeanSquaredError(f, q, df, size float64) Criteria {
	hold := func(ncp float64) Criterion {
		c := Criterion{Noncentrality: ncp, Critical: tail.NoncentralFQuantile(size, q, df, ncp), P: math.NaN()}
		if f >= 0 && !math.IsNaN(c.Critical) {
			c.P = tail.NoncentralF(f, q, df, ncp)
		}
		return c
	}
	out := Criteria{Exact: hold(0), Strong: hold(1)}
	out.SecondWeak = out.Strong
	if q != 1 {
		out.SecondWeak = hold(q)
	}
	return out
}

// BreakEven returns how far one linear restriction may be from the truth, in its own unit, before imposing it raises the mean squared error of the other
// coefficients: by exactly one standard deviation of its estimate in the long model, so the result is sd. For a dropped regressor the
// discrepancy is its true coefficient and sd that coefficient's standard deviation; in units of sd it is a true t of 1. The same mark holds
// for every coefficient that the restriction moves at all.
//
// Derivation: imposing it changes a coefficient's variance by -k^2 sd^2 and its bias by -k times the discrepancy, with the same k.
//
// sd is a true standard deviation; with an estimated one the result is an estimate. It is NaN for sd < 0 or NaN.
// Source: Toro-Vizcarrondo and Wallace (1968), as for MeanSquaredError, with one restriction.
func BreakEven(sd float64) float64 {
	if !(sd >= 0) {
		return math.NaN()
	}
	return sd
}

// BreakEvenBias returns the size of the bias, in the coefficient's unit, at which any number of linear restrictions leave a coefficient's mean squared
// error as it was,
//
//	sqrt(varLong - varRestricted):
//
// what they take off its variance is what the squared bias may be. Both variances, in the unit squared, must use the same error variance, or
// the difference means something else. A difference that is negative by less than 1e-12 of varLong counts as rounding and gives 0. It is NaN for a
// larger one, for a negative variance and for NaN.
func BreakEvenBias(varLong, varRestricted float64) float64 {
	gain := varLong - varRestricted
	switch {
	case !(varLong >= 0 && varRestricted >= 0) || math.IsInf(varLong, 1) || gain < -1e-12*varLong:
		return math.NaN()
	case gain < 0:
		return 0
	}
	return math.Sqrt(gain)
}
