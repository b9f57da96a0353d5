package compare_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"modelmend/compare"
	"modelmend/fit/dataset"
)

// invented makes n rows of p regressors of which the first five move together.
func invented(b *testing.B, n, p int) (*dataset.Table, string) {
	b.Helper()
	rng := rand.New(rand.NewPCG(3, 4))
	names := []string{"y"}
	for j := range p {
		names = append(names, fmt.Sprintf("x%d", j))
	}
	var cells [][]float64
	for range n {
		common := rng.NormFloat64()
		row := []float64{rng.NormFloat64()}
		for j := range p {
			v := rng.NormFloat64()
			if j < 5 {
				v = common + 0.2*v
			}
			row = append(row, v)
			row[0] += v / float64(j+1)
		}
		cells = append(cells, row)
	}
	return numbers(b, names, cells), "y = " + strings.Join(names[1:], " + ")
}

// BenchmarkNested runs one remedy with its tuning learned inside every fold, beside the model left alone.
func BenchmarkNested(b *testing.B) {
	for _, size := range []struct{ n, p int }{{1000, 10}, {1000, 20}, {20000, 20}} {
		table, eq := invented(b, size.n, size.p)
		for _, key := range []string{"ridge", "components", "partial-least-squares", "elastic-net"} {
			b.Run(fmt.Sprintf("%s/n=%d/p=%d", key, size.n, size.p), func(b *testing.B) {
				s := newStudy(eq)
				s.Remedies = only(key)
				b.ReportAllocs()
				for b.Loop() {
					if _, err := compare.Run(context.Background(), table, s, compare.Options{}); err != nil {
						b.Fatal(err)
					}
				}
			})
		}
	}
}

// BenchmarkResample gives the time of one resample of every alternative, tuning chosen again, on one core: the time of 400 resamples and the fits
// behind their acceleration, less that of none, over their number.
func BenchmarkResample(b *testing.B) {
	for _, size := range []struct{ n, p int }{{16, 6}, {1000, 20}, {20000, 30}, {20000, 50}} {
		table, eq := invented(b, size.n, size.p)
		run := func(resamples int) time.Duration {
			s := newStudy(eq)
			s.Resamples = resamples
			start := time.Now()
			if _, err := compare.Run(context.Background(), table, s, compare.Options{Workers: 1}); err != nil {
				b.Fatal(err)
			}
			return time.Since(start)
		}
		b.Run(fmt.Sprintf("n=%d/p=%d", size.n, size.p), func(b *testing.B) {
			var spent time.Duration
			rounds := 0
			for b.Loop() {
				base := run(0)
				spent += run(400) - base
				rounds++
			}
			b.ReportMetric(0, "ns/op")
			b.ReportMetric(float64(spent.Microseconds())/float64((400+min(size.n, 200))*rounds), "µs/resample")
		})
	}
}

// BenchmarkWide is the whole comparison of a thousand rows of 150 regressors with the paths of its tunings, without resamples.
func BenchmarkWide(b *testing.B) {
	table, eq := invented(b, 1000, 150)
	for b.Loop() {
		c, err := compare.Run(context.Background(), table, newStudy(eq), compare.Options{})
		if err != nil {
			b.Fatal(err)
		}
		for _, a := range c.Alternatives {
			c.Path(a)
		}
	}
}
