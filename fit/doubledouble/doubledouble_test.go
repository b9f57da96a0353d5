package doubledouble

import (
	"math"
	"math/big"
	"math/rand/v2"
	"strconv"
	"testing"
)

// exact is the value of x at 400 bits (math/big, the outside reference of this file).
func exact(x Number) *big.Float {
	f := new(big.Float).SetPrec(400).SetFloat64(x.Hi)
	return f.Add(f, new(big.Float).SetPrec(400).SetFloat64(x.Lo))
}

// gap is the relative distance of x from want.
func gap(x Number, want *big.Float) float64 {
	d := new(big.Float).SetPrec(400).Sub(exact(x), want)
	if want.Sign() == 0 {
		v, _ := d.Float64()
		return math.Abs(v)
	}
	v, _ := d.Quo(d, want).Float64()
	return math.Abs(v)
}

func TestArithmeticAgainstBig(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	any := func() Number {
		hi := (rng.Float64() - 0.5) * math.Pow(10, float64(rng.IntN(20)-10))
		s, e := TwoSum(hi, hi*0x1p-54*(rng.Float64()-0.5))
		return Number{s, e}
	}
	const unit = 0x1p-100
	op := func() *big.Float { return new(big.Float).SetPrec(400) }
	for range 20000 {
		x, y := any(), any()
		bx, by := exact(x), exact(y)
		for name, c := range map[string]struct {
			got  Number
			want *big.Float
		}{
			"product":  {x.Mul(y), op().Mul(bx, by)},
			"quotient": {x.Div(y), op().Quo(bx, by)},
			"by float": {x.MulFloat(y.Hi), op().Mul(bx, op().SetFloat64(y.Hi))},
			"root":     {x.Abs().Sqrt(), op().Sqrt(op().Abs(bx))},
			"cube":     {x.Power(3), op().Mul(bx, op().Mul(bx, bx))},
		} {
			if g := gap(c.got, c.want); g > unit {
				t.Fatalf("%s of %v and %v: relative gap %g", name, x, y, g)
			}
		}
		// Sums may cancel: the gap is measured against the larger operand.
		size := math.Max(math.Abs(x.Hi), math.Abs(y.Hi))
		diff, _ := op().Sub(exact(x.Add(y)), op().Add(bx, by)).Float64()
		if math.Abs(diff) > unit*size {
			t.Fatalf("sum of %v and %v: gap %g", x, y, diff)
		}
	}
}

func TestParseKeepsDigits(t *testing.T) {
	for _, s := range []string{"0.1", "83.0", "-6.860120914", "1e-5", "123456789.123456789", "0.30000000000000004", "1.7976931348623157e308", "4.9e-324", "-0", "+5", ".5", "5.",
		"100000000000000000000000", "0.1234567890123456789012345678901", "12e3", "1E+2"} {
		x, err := Parse(s)
		if err != nil {
			t.Errorf("%s: %v", s, err)
			continue
		}
		f, _ := strconv.ParseFloat(s, 64)
		if x.Hi != f {
			t.Errorf("%s: high part %v, strconv.ParseFloat says %v", s, x.Hi, f)
		}
		want, _, _ := big.ParseFloat(s, 10, 400, big.ToNearestEven)
		if g := gap(x, want); g > 0x1p-100 && math.Abs(f) > 1e-280 {
			t.Errorf("%s: relative gap %g", s, g)
		}
	}
	for _, s := range []string{"", " 1", "1 ", "0x10", "1_000", "Inf", "nan", "1e", "--1", "1.2.3", "e5", "1e400", "1,5"} {
		if x, err := Parse(s); err == nil {
			t.Errorf("%q was read as %v", s, x)
		}
	}
}

func TestSpecialValues(t *testing.T) {
	if v := From(1).Div(From(0)); !math.IsInf(v.Hi, 1) {
		t.Errorf("1/0 is %v", v)
	}
	if v := From(-1).Sqrt(); !math.IsNaN(v.Hi) {
		t.Errorf("root of -1 is %v", v)
	}
	if v := From(7).Power(0); v.Float() != 1 {
		t.Errorf("7^0 is %v", v)
	}
	if !From(1).Less(Number{1, 1e-20}) || From(2).Less(From(1)) {
		t.Error("order")
	}
}

// FuzzParse: the high part is what strconv reads, for every plain decimal.
func FuzzParse(f *testing.F) {
	for _, s := range []string{"0.1", "1e22", "-12.5e-3", "999999999999999.9", "1e999"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		x, err := Parse(s)
		if err != nil {
			return
		}
		want, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatalf("%q was read, strconv refuses it", s)
		}
		if x.Hi != want {
			t.Fatalf("%q: %v, strconv says %v", s, x.Hi, want)
		}
	})
}
