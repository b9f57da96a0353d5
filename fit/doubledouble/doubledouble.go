// Package doubledouble holds numbers as the unevaluated sum of two float64, about 31 decimal digits.
//
// It takes decimals and float64 and gives sums, products, quotients and roots that keep the digits which
// cross-products of nearly dependent regressors would otherwise lose. It knows nothing of data; it stands first
// in the flow, before dataset, and every numerical package may use it.
//
// The algorithms are the classical error-free transformations: the sum of Knuth (two-sum) and the product through
// a fused multiply-add. Source: Dekker (1971), Numerische Mathematik 18, 224-242 (citation from memory).
package doubledouble

import (
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"
)

// Number is the sum Hi + Lo with |Lo| at most half a unit in the last place of Hi. The zero value is 0.
type Number struct{ Hi, Lo float64 }

// From returns x exactly.
func From(x float64) Number { return Number{Hi: x} }

// TwoSum returns s = fl(a+b) and the exact error e, so that a+b = s+e.
func TwoSum(a, b float64) (s, e float64) {
	s = a + b
	t := s - a
	e = (a - (s - t)) + (b - t)
	return s, e
}

func quickTwoSum(a, b float64) (s, e float64) {
	s = a + b
	e = b - (s - a)
	return s, e
}

// TwoProduct returns p = fl(a*b) and the exact error e, so that a*b = p+e barring underflow.
func TwoProduct(a, b float64) (p, e float64) {
	p = float64(a * b)
	e = math.FMA(a, b, -p)
	return p, e
}

// Add returns x + y with a relative error of a few units in 2^-105.
func (x Number) Add(y Number) Number {
	s, e := TwoSum(x.Hi, y.Hi)
	t, f := TwoSum(x.Lo, y.Lo)
	e += t
	s, e = quickTwoSum(s, e)
	e += f
	s, e = quickTwoSum(s, e)
	return Number{s, e}
}

// AddFloat returns x + y.
func (x Number) AddFloat(y float64) Number {
	s, e := TwoSum(x.Hi, y)
	e += x.Lo
	s, e = quickTwoSum(s, e)
	return Number{s, e}
}

// Neg returns -x.
func (x Number) Neg() Number { return Number{-x.Hi, -x.Lo} }

// Sub returns x - y.
func (x Number) Sub(y Number) Number { return x.Add(y.Neg()) }

// Mul returns x * y with a relative error of a few units in 2^-104.
func (x Number) Mul(y Number) Number {
	p, e := TwoProduct(x.Hi, y.Hi)
	e += float64(x.Hi*y.Lo) + float64(x.Lo*y.Hi)
	p, e = quickTwoSum(p, e)
	return Number{p, e}
}

// MulFloat returns x * y.
func (x Number) MulFloat(y float64) Number {
	p, e := TwoProduct(x.Hi, y)
	e += float64(x.Lo * y)
	p, e = quickTwoSum(p, e)
	return Number{p, e}
}

// Div returns x / y. Division by zero follows float64: an infinity or a NaN in Hi.
func (x Number) Div(y Number) Number {
	q := x.Hi / y.Hi
	if math.IsInf(q, 0) || math.IsNaN(q) || q == 0 {
		return Number{Hi: q}
	}
	r := x.Sub(y.MulFloat(q))
	q2 := r.Hi / y.Hi
	r = r.Sub(y.MulFloat(q2))
	q3 := r.Hi / y.Hi
	q, q2 = quickTwoSum(q, q2)
	return Number{q, q2}.AddFloat(q3)
}

// Sqrt returns the square root of x: 0 for 0, NaN for a negative x.
func (x Number) Sqrt() Number {
	if x.Hi == 0 {
		return Number{}
	}
	if x.Hi < 0 {
		return Number{Hi: math.NaN()}
	}
	s := math.Sqrt(x.Hi)
	if math.IsInf(s, 0) {
		return Number{Hi: s}
	}
	p, e := TwoProduct(s, s)
	r := x.Sub(Number{p, e})
	return Number{Hi: s}.AddFloat(r.Hi / (2 * s))
}

// Abs returns |x|.
func (x Number) Abs() Number {
	if x.Hi < 0 || (x.Hi == 0 && x.Lo < 0) {
		return x.Neg()
	}
	return x
}

// Float returns the float64 nearest to x.
func (x Number) Float() float64 { return x.Hi + x.Lo }

// Less reports whether x < y.
func (x Number) Less(y Number) bool { return x.Hi < y.Hi || (x.Hi == y.Hi && x.Lo < y.Lo) }

// IsFinite reports whether x is neither infinite nor NaN.
func (x Number) IsFinite() bool { return !math.IsInf(x.Hi, 0) && !math.IsNaN(x.Hi) }

// Power returns x to the whole power k >= 0 by repeated squaring; x^0 is 1.
func (x Number) Power(k int) Number {
	out := Number{Hi: 1}
	for k > 0 {
		if k&1 == 1 {
			out = out.Mul(x)
		}
		x = x.Mul(x)
		k >>= 1
	}
	return out
}

// Parse reads a decimal number as strconv.ParseFloat does (without hexadecimal, underscores, "Inf" or "NaN")
// and keeps the digits which do not fit into a float64. Hi equals the result of strconv.ParseFloat.
//
// It returns an error when s is not a plain decimal number or is too large for a float64.
func Parse(s string) (Number, error) {
	if x, ok := parsePlain(s); ok {
		return x, nil
	}
	if !plainDecimal(s) {
		return Number{}, fmt.Errorf("%q is not a number", s)
	}
	hi, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return Number{}, fmt.Errorf("%q is too large", s)
	}
	if m, exp, ok := smallDecimal(s); ok {
		if x, ok := Scaled(m, exp); ok {
			return x, nil
		}
	}
	return parseExact(s, hi), nil
}

// parsePlain reads digits with at most one point and at most 15 digits in all, the form of nearly every cell, in one pass.
func parsePlain(s string) (Number, bool) {
	if len(s) == 0 || len(s) > 17 {
		return Number{}, false
	}
	i := 0
	negative := s[0] == '-'
	if negative || s[0] == '+' {
		i = 1
	}
	var mant uint64
	digits, point := 0, -1
	for ; i < len(s); i++ {
		c := s[i] - '0'
		if c <= 9 {
			mant = mant*10 + uint64(c)
			digits++
			continue
		}
		if s[i] != '.' || point >= 0 {
			return Number{}, false
		}
		point = digits
	}
	if digits == 0 || digits > 15 {
		return Number{}, false
	}
	m := float64(mant)
	if negative {
		m = -m
	}
	if point < 0 {
		return Number{Hi: m}, true
	}
	return Scaled(m, point-digits)
}

// Scaled returns m * 10^exp for a whole m below 2^53 and |exp| <= 22, where the power of ten is exact: the quotient of two exact numbers is
// correctly rounded, and what is left of the division is exact as well.
func Scaled(m float64, exp int) (Number, bool) {
	switch {
	case exp == 0 || m == 0:
		return Number{Hi: m}, true
	case exp > 0 && exp <= 22:
		p, e := TwoProduct(m, pow10[exp])
		return Number{p, e}, true
	case exp < 0 && exp >= -22:
		d := pow10[-exp]
		hi := m / d
		return Number{Hi: hi, Lo: math.FMA(-hi, d, m) / d}, true
	}
	return Number{}, false
}

func parseExact(s string, hi float64) Number {
	if hi == 0 || len(s) > 4000 || math.Abs(hi) < 1e-280 {
		return Number{Hi: hi}
	}
	f, _, err := big.ParseFloat(s, 10, 300, big.ToNearestEven)
	if err != nil {
		return Number{Hi: hi}
	}
	f.Sub(f, new(big.Float).SetFloat64(hi))
	lo, _ := f.Float64()
	return Number{Hi: hi, Lo: lo}
}

var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16,
	1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// smallDecimal gives a decimal of at most 15 digits as m * 10^exp with m a whole number.
func smallDecimal(s string) (m float64, exp int, ok bool) {
	neg := false
	i := 0
	if i < len(s) && (s[i] == '-' || s[i] == '+') {
		neg = s[i] == '-'
		i++
	}
	var mant uint64
	digits, seenPoint := 0, false
	for ; i < len(s); i++ {
		c := s[i]
		if c == '.' {
			seenPoint = true
			continue
		}
		if c < '0' || c > '9' {
			break
		}
		if mant != 0 || c != '0' {
			digits++
		}
		if digits > 15 {
			return 0, 0, false
		}
		mant = mant*10 + uint64(c-'0')
		if seenPoint {
			exp--
		}
	}
	if i < len(s) {
		e, err := strconv.Atoi(s[i+1:])
		if err != nil || e > 1000 || e < -1000 {
			return 0, 0, false
		}
		exp += e
	}
	m = float64(mant)
	if neg {
		m = -m
	}
	return m, exp, true
}

func plainDecimal(s string) bool {
	i := 0
	if i < len(s) && (s[i] == '-' || s[i] == '+') {
		i++
	}
	digits := 0
	for i < len(s) && s[i] >= '0' && s[i] <= '9' {
		i++
		digits++
	}
	if i < len(s) && s[i] == '.' {
		i++
		for i < len(s) && s[i] >= '0' && s[i] <= '9' {
			i++
			digits++
		}
	}
	if digits == 0 {
		return false
	}
	if i < len(s) && (s[i] == 'e' || s[i] == 'E') {
		i++
		if i < len(s) && (s[i] == '-' || s[i] == '+') {
			i++
		}
		start := i
		for i < len(s) && s[i] >= '0' && s[i] <= '9' {
			i++
		}
		if i == start {
			return false
		}
	}
	return i == len(s)
}

// String prints the sum rounded to a float64.
func (x Number) String() string {
	return strings.TrimSuffix(strconv.FormatFloat(x.Float(), 'g', -1, 64), "+00")
}
