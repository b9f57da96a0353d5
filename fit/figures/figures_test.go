package figures

import (
	"math"
	"strings"
	"testing"
)

func TestFigures(t *testing.T) {
	for _, c := range []struct {
		v            float64
		digits       int
		short, fixed string
	}{
		{0, 3, "0", "0"}, {0.05, 3, "0.05", "0.0500"}, {-1234.56, 3, "-1230", "-1230"}, {0.17699, 4, "0.177", "0.1770"}, {9.9996, 4, "10", "10.00"},
		{123456789, 3, "123000000", "123000000"}, {1.23e-9, 3, "1.23e-09", "1.23e-09"}, {math.NaN(), 3, "not available", "not available"},
		{math.Inf(1), 3, "infinite", "infinite"}, {0.0000123, 2, "0.000012", "0.000012"},
	} {
		if got := Short(c.v, c.digits); got != c.short {
			t.Errorf("Short(%v, %d) = %q, want %q", c.v, c.digits, got, c.short)
		}
		if got := Fixed(c.v, c.digits); got != c.fixed {
			t.Errorf("Fixed(%v, %d) = %q, want %q", c.v, c.digits, got, c.fixed)
		}
	}
}

func TestPercentAndQuoted(t *testing.T) {
	for v, want := range map[float64]string{0: "0.0 %", 0.123: "12.3 %", 0.99981: "99.981 %", 0.9999999: "99.999 %", 1: "100.0 %", math.NaN(): "not available"} {
		if got := Percent(v); got != want {
			t.Errorf("Percent(%v) = %q, want %q", v, got, want)
		}
	}
	long := strings.Repeat("ä", 61)
	for s, want := range map[string]string{"a\"b\n": `"a\"b\n"`, long: `"` + long[:2*57] + `..."`} {
		if got := Quoted(s); got != want {
			t.Errorf("Quoted(%q) = %s, want %s", s, got, want)
		}
	}
}
