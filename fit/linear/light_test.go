package linear

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"modelmend/fit/reduction"
)

// lightPair makes the same weighted rows twice: as units that are weighted, and as rows written out as often as their weight.
func lightPair(t *testing.T, seed uint64, n, p int, constant, grouped bool) (u *reduction.Units, sums [][]float64, written *reduction.Reduction) {
	t.Helper()
	x, y := random(seed, n, p, 2)
	rng := rand.New(rand.NewPCG(seed, 5))
	cols := append(slices.Clone(x), y)
	all, err := reduction.Reduce(x, y, constant, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	const folds = 4
	unit, fold := make([]int32, n), make([]int32, n)
	count := n
	for i := range unit {
		unit[i], fold[i] = int32(i), int32(rng.IntN(folds))
	}
	if grouped {
		count = n / 6
		for i := range unit {
			unit[i] = int32(i % count)
			fold[i] = unit[i] % folds
		}
	}
	u = reduction.NewUnits(all, cols, unit, count, fold, folds)
	weight := make([]float64, count)
	for range count {
		weight[rng.IntN(count)]++
	}
	again := make([]reduction.Column, len(cols))
	var of []int32
	for i := range n {
		for range int(weight[unit[i]]) {
			for j := range cols {
				again[j].Hi = append(again[j].Hi, cols[j].Hi[i])
			}
			of = append(of, fold[i])
		}
	}
	cell := make([]int32, len(of))
	for i := range cell {
		cell[i] = int32(i)
	}
	written, err = reduction.Reduce(again[:p], again[p], constant, reduction.Split{Cell: cell, Cells: len(of), Fold: [][]int32{of}, Counts: []int{folds}}, 1)
	if err != nil {
		t.Fatal(err)
	}
	return u, u.Sum([][]float64{weight})[0], written
}

func total(sums [][]float64, but int) []float64 {
	out := make([]float64, len(sums[0]))
	for f, s := range sums {
		if f == but {
			continue
		}
		for k, v := range s {
			out[k] += v
		}
	}
	return out
}

// TestLightAgrees holds weighted float64 samples to the double-double fits of the rows written out as often as they are drawn; those are held to
// certified values elsewhere.
func TestLightAgrees(t *testing.T) {
	for seed := range uint64(40) {
		constant, grouped := seed%4 != 3, seed%2 == 1
		p := 2 + int(seed%5)
		u, sums, red := lightPair(t, seed, 120, p, constant, grouped)
		name := fmt.Sprintf("seed %d", seed)
		const f = 1
		train := NewSample(red, red.Total.Minus(red.Parts[0][f]))
		held := NewHeldOut(red, red.Parts[0][f], train)
		lt := NewLightSample(u, total(sums, f))
		lh := NewLightHeldOut(u, sums[f], lt)
		if lt.N != train.N || lh.N != held.N {
			t.Fatalf("%s: %d and %d rows, want %d and %d", name, lt.N, lh.N, train.N, held.N)
		}
		same := func(what string, got, want []float64) {
			t.Helper()
			size := 0.0
			for j := range want {
				size = max(size, math.Abs(want[j])*train.SD(j))
			}
			for j := range want {
				if math.Abs(got[j]-want[j])*train.SD(j) > 1e-10*size {
					t.Errorf("%s: %s: slope %d is %.15g, want %.15g", name, what, j, got[j], want[j])
				}
			}
		}
		fit, lfit := train.LeastSquares(true), lt.LeastSquares(true)
		same("least squares", lfit.Slopes, fit.Slopes)
		near(t, name+" rss", lfit.RSS, fit.RSS, 1e-9)
		near(t, name+" constant", lfit.Constant(lt), fit.Constant(train), 1e-7)
		for i := range fit.Inverse {
			near(t, name+" inverse", lfit.Inverse[i], fit.Inverse[i], 1e-8)
		}
		near(t, name+" sse", lh.SSE(lfit.Slopes), held.SSE(fit.Slopes), 1e-9)
		near(t, name+" sst", lh.SST(), held.SST(), 1e-9)
		near(t, name+" sd", lt.SD(0), train.SD(0), 1e-12)
		near(t, name+" correlation", lt.Correlation(0, 1), train.Correlation(0, 1), 1e-11)
		sp, lsp := train.Spectrum(nil), lt.Spectrum(nil)
		for k := range sp.Sigma {
			near(t, name+" sigma", lsp.Sigma[k], sp.Sigma[k], 1e-11)
		}
		penalties := []float64{0, 1e-4, 0.01, 0.3, 5}
		for _, k := range penalties {
			same("ridge", lsp.RidgeSlopes(k), sp.RidgeSlopes(k))
			near(t, name+" degrees", lsp.RidgeDegrees(k), sp.RidgeDegrees(k), 1e-10)
		}
		for k := range p + 1 {
			same("components", lsp.ComponentSlopes(k), sp.ComponentSlopes(k))
		}
		got := lh.PathSSE(lsp, len(penalties), func(i, k int) float64 { return lsp.Sigma[k] / (lsp.Sigma[k]*lsp.Sigma[k] + penalties[i]) })
		for i, k := range penalties {
			near(t, name+" path", got[i], held.SSE(sp.RidgeSlopes(k)), 1e-9)
		}
		spare := []int{p - 1}
		ssp, lssp := train.Spectrum(spare), lt.Spectrum(spare)
		same("ridge with a spared slope", lssp.RidgeSlopes(0.2), ssp.RidgeSlopes(0.2))
		for which, pair := range map[string]struct {
			h  *HeldOut
			sp *Spectrum
		}{"light": {lh, lssp}, "exact": {held, ssp}} {
			got := pair.h.PathSSE(pair.sp, len(penalties), func(i, k int) float64 { return pair.sp.Sigma[k] / (pair.sp.Sigma[k]*pair.sp.Sigma[k] + penalties[i]) })
			for i, k := range penalties {
				near(t, name+" spared path, "+which, got[i], held.SSE(ssp.RidgeSlopes(k)), 1e-9)
			}
		}
		near(t, name+" spared degrees", lssp.RidgeDegrees(0.2), ssp.RidgeDegrees(0.2), 1e-10)
		without, inverse, ok := lt.Without([]int{0}, true)
		if !ok {
			t.Fatal("Without refused a full-rank sample")
		}
		var keep []int
		for j := 1; j < p; j++ {
			keep = append(keep, j)
		}
		kept := train.Keep(keep).LeastSquares(true)
		for i := range keep {
			for j := range keep {
				near(t, name+" inverse without the first", inverse[keep[i]*p+keep[j]], kept.Inverse[i*len(keep)+j], 1e-8)
			}
		}
		if p > 3 {
			two, inv, ok := lt.Without([]int{2, 0}, true)
			rest := train.Keep(append([]int{1}, keep[2:]...)).LeastSquares(true)
			if !ok || two[0] != 0 || two[2] != 0 {
				t.Errorf("%s: without two: %v", name, two)
			}
			near(t, name+" without two", two[1], rest.Slopes[0], 1e-8)
			near(t, name+" inverse without two", inv[p+1], rest.Inverse[0], 1e-9)
		}
		same("without the first", without, append([]float64{0}, train.Keep(keep).LeastSquares(false).Slopes...))
		same("kept", append([]float64{0}, lt.Keep(keep).LeastSquares(false).Slopes...), without)
		a := make([]float64, p*(p-1)) // the first two merged
		a[0], a[p-1] = 2, 0.5
		for j := 2; j < p; j++ {
			a[j*(p-1)+j-1] = 1
		}
		near(t, name+" merged", lt.Transform(a, p-1).LeastSquares(false).Slopes[0], train.Transform(a, p-1).LeastSquares(false).Slopes[0], 1e-9)
	}
}

// TestLightDependent: a column that depends on another in the drawn rows, or does not vary in them, is found.
func TestLightDependent(t *testing.T) {
	n, p := 40, 3
	x, y := random(3, n, p, 1)
	for i := range n {
		if i >= 8 {
			x[2].Hi[i] = 7 // varies in the first rows alone
		}
	}
	red, err := reduction.Reduce(x, y, true, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	unit, fold, weight := make([]int32, n), make([]int32, n), make([]float64, n)
	for i := range unit {
		unit[i] = int32(i)
		if i >= 8 {
			weight[i] = 1
		}
	}
	u := reduction.NewUnits(red, append(slices.Clone(x), y), unit, n, fold, 1)
	s := NewLightSample(u, u.Sum([][]float64{weight})[0][0])
	fit := s.LeastSquares(false)
	if fit.Rank != 2 || fit.NotIdentified == nil || !fit.NotIdentified[2] || fit.NotIdentified[0] || fit.Slopes[2] != 0 {
		t.Errorf("rank %d, not identified %v, slopes %v", fit.Rank, fit.NotIdentified, fit.Slopes)
	}
	sx, sy := subset(x, y, func(i int) bool { return i >= 8 })
	want := sampleOf(t, sx[:2], sy, true).LeastSquares(false).Slopes
	near(t, "slope", fit.Slopes[0], want[0], 1e-10)
	if _, _, ok := s.Without([]int{0}, false); ok {
		t.Error("Without accepted a dependent sample")
	}
}

// TestLightLongley holds a light sample to certified coefficients (testdata/nist/SOURCE.md): about nine digits of this tangled set are left.
func TestLightLongley(t *testing.T) {
	_, cols := readColumns(t, "../../testdata/longley/data.csv")
	y, x := cols[0], cols[1:]
	red, err := reduction.Reduce(x, y, true, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	if !EnoughForLight(NewSample(red, red.Total), 1e-6) {
		t.Fatal("Longley's regressors are not that close to dependent")
	}
	u := reduction.GroupUnits(red, []*reduction.Moments{red.Total}, []int32{0}, 1)
	got := NewLightSample(u, u.Sum([][]float64{{1}})[0][0]).LeastSquares(false).Slopes
	for j, want := range []float64{15.0618722713733, -0.0358191792925910, -2.02022980381683, -1.03322686717359, -0.0511041056535807, 1829.15146461355} {
		near(t, fmt.Sprintf("slope %d", j+1), got[j], want, 1e-8)
	}
}

// TestLightGate: powers that all but depend on each other stay with double-double.
func TestLightGate(t *testing.T) {
	n := 50
	x := []reduction.Column{{Hi: make([]float64, n)}, {Hi: make([]float64, n)}}
	y := reduction.Column{Hi: make([]float64, n)}
	for i := range n {
		v := float64(i)
		x[0].Hi[i], x[1].Hi[i], y.Hi[i] = v, v+1e-3*math.Sin(v), math.Cos(v)
	}
	if EnoughForLight(sampleOf(t, x, y, true), 1e-6) {
		t.Error("eigenvalues a billion apart passed")
	}
	exact := reduction.Column{Hi: make([]float64, n)}
	for i := range n {
		exact.Hi[i] = 3 * x[0].Hi[i]
	}
	if EnoughForLight(sampleOf(t, x[:1], exact, true), 1e-6) {
		t.Error("a fit without residuals passed")
	}
}
