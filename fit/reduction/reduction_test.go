package reduction

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"modelmend/fit/doubledouble"
)

// TestMomentsAgainstExact: cross-products of numbers with a mean a billion times their spread agree with exact rational arithmetic
// (math/big) to more digits than a float64 holds.
func TestMomentsAgainstExact(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 3))
	const n = 500
	x, y := Column{}, Column{}
	for range n {
		x.Hi, x.Lo = append(x.Hi, 1e9+rng.Float64()), append(x.Lo, 1e-9*(rng.Float64()-0.5)*0x1p-30)
		y.Hi = append(y.Hi, -1e9+rng.Float64())
	}
	for _, constant := range []bool{true, false} {
		red, err := Reduce([]Column{x}, y, constant, Split{}, 1)
		if err != nil {
			t.Fatal(err)
		}
		rat := func(v float64) *big.Rat { return new(big.Rat).SetFloat64(v) }
		sum := new(big.Rat)
		ox, oy := rat(red.Origin[0].Hi), rat(red.Origin[1].Hi)
		for i := range n {
			a := rat(x.Hi[i])
			a.Add(a, rat(x.Lo[i])).Sub(a, ox)
			b := rat(y.Hi[i])
			b.Sub(b, oy)
			sum.Add(sum, a.Mul(a, b))
		}
		got := red.Total.Cross(0, 1)
		g := rat(got.Hi)
		g.Add(g, rat(got.Lo)).Sub(g, sum)
		rel, _ := g.Quo(g, sum).Float64()
		if math.Abs(rel) > 1e-27 {
			t.Errorf("constant %v: relative gap %g", constant, rel)
		}
	}
}

// TestFoldsAddUp: folds of every repeat add up to the total, and taking one away leaves what the others add up to.
func TestFoldsAddUp(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 5))
	const n = 97
	x, y := make([]Column, 3), Column{}
	folds := [][]int32{make([]int32, n), make([]int32, n)}
	for i := range n {
		for j := range x {
			x[j].Hi = append(x[j].Hi, rng.NormFloat64()*100)
		}
		y.Hi = append(y.Hi, rng.NormFloat64())
		folds[0][i], folds[1][i] = int32(i%4), int32(rng.IntN(4))
	}
	red, err := Reduce(x, y, true, rowsAsCells(folds, 4, 4), 2)
	if err != nil {
		t.Fatal(err)
	}
	for r, parts := range red.Parts {
		rows := 0
		rest := NewMoments(4)
		for f, p := range parts {
			rows += p.N
			if f > 0 {
				rest = rest.Plus(p)
			}
		}
		if rows != n {
			t.Errorf("repeat %d holds %d rows", r, rows)
		}
		left := red.Total.Minus(parts[0])
		if left.N != rest.N {
			t.Errorf("%d rows left, want %d", left.N, rest.N)
		}
		for i := range 4 {
			for j := range 4 {
				a, b := left.Cross(i, j), rest.Cross(i, j)
				if d := a.Sub(b).Float(); math.Abs(d) > 1e-26*(1+math.Abs(a.Hi)) {
					t.Errorf("repeat %d, entry %d,%d: gap %g", r, i, j, d)
				}
			}
		}
	}
}

func TestWorkersAndShapes(t *testing.T) {
	x := []Column{{Hi: []float64{1, 2, 4}}, {Hi: []float64{0, 1, 0}}}
	y := Column{Hi: []float64{3, 1, 2}}
	folds := [][]int32{{0, 1, 0}, {1, 1, 0}}
	a, err := Reduce(x, y, true, rowsAsCells(folds, 2, 2), 1)
	if err != nil {
		t.Fatal(err)
	}
	b, err := Reduce(x, y, true, rowsAsCells(folds, 2, 2), 8)
	if err != nil {
		t.Fatal(err)
	}
	for i := range 3 {
		for j := range 3 {
			if a.Total.Cross(i, j) != b.Total.Cross(i, j) {
				t.Errorf("entry %d,%d depends on the number of workers", i, j)
			}
		}
	}
	// By hand, about the first row: (1,3,7-6=..): sum of (x1-1)(y-3) = 0*0 + 1*-2 + 3*-1 = -5.
	if got := a.Total.Cross(0, 2); got != (doubledouble.Number{Hi: -5}) {
		t.Errorf("cross-product %v, want -5", got)
	}
	if _, err := Reduce([]Column{{Hi: []float64{1}}}, y, true, Split{}, 1); err == nil {
		t.Error("columns of unequal length were accepted")
	}
}

// rowsAsCells makes every row a cell of its own.
func rowsAsCells(folds [][]int32, counts ...int) Split {
	s := Split{Cells: len(folds[0]), Fold: folds, Counts: counts}
	for i := range folds[0] {
		s.Cell = append(s.Cell, int32(i))
	}
	return s
}

// TestCellsChangeNothing: summing rows into cells first gives the folds that rows give one by one, to the digits of double-double, and the
// same bits for any number of workers.
func TestCellsChangeNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 9))
	const n, cells = 400, 20
	x, y := make([]Column, 3), Column{}
	s := Split{Cells: cells, Fold: [][]int32{make([]int32, cells), make([]int32, cells)}, Counts: []int{4, 5}}
	for c := range cells {
		s.Fold[0][c], s.Fold[1][c] = int32(c%4), int32(c%5)
	}
	one := [][]int32{nil, nil}
	for range n {
		c := int32(rng.IntN(cells))
		s.Cell = append(s.Cell, c)
		for r := range one {
			one[r] = append(one[r], s.Fold[r][c])
		}
		for j := range x {
			x[j].Hi = append(x[j].Hi, 1e6+rng.NormFloat64())
		}
		y.Hi = append(y.Hi, rng.NormFloat64())
	}
	a, err := Reduce(x, y, true, s, 1)
	if err != nil {
		t.Fatal(err)
	}
	again, _ := Reduce(x, y, true, s, 3)
	b, err := Reduce(x, y, true, rowsAsCells(one, 4, 5), 2)
	if err != nil {
		t.Fatal(err)
	}
	for r := range a.Parts {
		for f, m := range a.Parts[r] {
			if m.N != b.Parts[r][f].N {
				t.Fatalf("repeat %d fold %d: %d rows, want %d", r, f, m.N, b.Parts[r][f].N)
			}
			for i := range 4 {
				for j := range 4 {
					if m.Cross(i, j) != again.Parts[r][f].Cross(i, j) {
						t.Errorf("repeat %d fold %d: the number of workers matters", r, f)
					}
					p, q := m.Cross(i, j), b.Parts[r][f].Cross(i, j)
					if d := p.Sub(q).Float(); math.Abs(d) > 1e-26*(1+math.Abs(p.Hi)) {
						t.Errorf("repeat %d fold %d entry %d,%d: gap %g", r, f, i, j, d)
					}
				}
			}
		}
	}
}

func BenchmarkReduce(b *testing.B) {
	for _, size := range []struct {
		name string
		n, p int
	}{{"n=1e4/p=20", 10000, 20}, {"n=1e5/p=30", 100000, 30}} {
		b.Run(size.name, func(b *testing.B) {
			rng := rand.New(rand.NewPCG(6, 7))
			x, y := make([]Column, size.p), Column{Hi: make([]float64, size.n)}
			folds := [][]int32{make([]int32, size.n)}
			for j := range x {
				x[j].Hi = make([]float64, size.n)
				for i := range x[j].Hi {
					x[j].Hi[i] = rng.NormFloat64()
				}
			}
			for i := range folds[0] {
				folds[0][i] = int32(i % 10)
			}
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Reduce(x, y, true, rowsAsCells(folds, 10), 1); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
