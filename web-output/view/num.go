package view

import (
	"math"
	"strconv"
)

// Num is a float64 that marshals with 15 significant digits, and as null where it is not finite.
type Num float64

// None is the Num that marshals as null.
func None() Num { return Num(math.NaN()) }

// IsNone reports whether n marshals as null.
func (n Num) IsNone() bool { return math.IsNaN(float64(n)) || math.IsInf(float64(n), 0) }

// MarshalJSON writes n with 15 significant digits, or null.
func (n Num) MarshalJSON() ([]byte, error) {
	if n.IsNone() {
		return []byte("null"), nil
	}
	v := float64(n)
	if v == 0 {
		return []byte("0"), nil
	}
	abs := math.Abs(v)
	if abs >= 1e-6 && abs < 1e21 {
		short, err := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 15, 64), 64)
		if err != nil {
			return nil, err
		}
		return strconv.AppendFloat(nil, short, 'f', -1, 64), nil
	}
	short, err := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 15, 64), 64)
	if err != nil || math.IsInf(short, 0) {
		short = v
	}
	return strconv.AppendFloat(nil, short, 'e', -1, 64), nil
}

// UnmarshalJSON reads a number or null.
func (n *Num) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = None()
		return nil
	}
	v, err := strconv.ParseFloat(string(b), 64)
	*n = Num(v)
	return err
}
