package doubledouble

import "testing"

func BenchmarkParse(b *testing.B) {
	cells := []string{"1.234567890", "-0.5", "42", "3.14159265358979", "1e-5"}
	b.ReportAllocs()
	for b.Loop() {
		for _, s := range cells {
			if _, err := Parse(s); err != nil {
				b.Fatal(err)
			}
		}
	}
}
