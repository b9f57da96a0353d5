package linear

import (
	"fmt"
	"math"
	"testing"
)

// BenchmarkPaths gives what a tuning costs on one split of light samples: the spectrum and a hundred penalties of ridge, the components of partial least
// squares beside a spectrum that is there, and
// sixty penalties of an elastic net beside the same.
func BenchmarkPaths(b *testing.B) {
	for _, p := range []int{6, 20, 30, 50} {
		x, y := random(1, 20*p, p, 1.5)
		s := sampleOf(b, x, y, true)
		l := &Sample{N: s.N, P: p, Constant: true, Mean: s.Mean, MeanY: s.MeanY, light: &light{s: floats(s.S), r: floats(s.R), yy: s.YY.Float()}}
		h := &HeldOut{N: s.N, P: p, light: l.light}
		fresh := func() *Sample {
			return &Sample{N: l.N, P: p, Constant: true, Mean: l.Mean, MeanY: l.MeanY, light: l.light}
		}
		b.Run(fmt.Sprintf("ridge/p=%d", p), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				sp := fresh().Spectrum(nil)
				h.PathSSE(sp, 101, func(i, k int) float64 { return sp.Sigma[k] / (sp.Sigma[k]*sp.Sigma[k] + float64(i)/100) })
			}
		})
		b.Run(fmt.Sprintf("partial/p=%d", p), func(b *testing.B) {
			b.ReportAllocs()
			sp := fresh().Spectrum(nil)
			for b.Loop() {
				w := sp.Krylov()
				h.PathSSE(sp, p+1, func(i, k int) float64 { return w[i][k] })
			}
		})
		b.Run(fmt.Sprintf("net/p=%d", p), func(b *testing.B) {
			b.ReportAllocs()
			sp := fresh().Spectrum(nil)
			for b.Loop() {
				c, r, scale, length := l.Standardized()
				n := NewNet(c, r)
				n.Know(sp)
				slopes := make([]float64, p)
				for i := range 60 {
					penalty := 2 * math.Pow(5e-5, float64(i)/59)
					for j, v := range n.Solve(0.5*penalty, 0.5*penalty) {
						slopes[j] = v * length / scale[j]
					}
					h.SSE(slopes)
				}
			}
		})
	}
}
