package folds

import (
	"math"
	"reflect"
	"testing"
)

func TestRandomIsBalancedSeededAndDiffersByRepeat(t *testing.T) {
	for _, n := range []int{10, 57, 534, 90_001} {
		p, err := NewRandom(n, 10, 3, 7, true)
		if err != nil {
			t.Fatal(err)
		}
		for r := range p.Fold {
			sizes := make([]int, 10)
			for i := range n {
				sizes[p.Of(r, i)]++
			}
			for f, s := range sizes {
				slack := 1.0
				if n > Exact { // cells may differ by one row a block
					slack = 100 * math.Ceil(float64(n)/Block)
				}
				if want := float64(n) / 10; math.Abs(float64(s)-want) > slack {
					t.Errorf("n=%d repeat %d fold %d holds %d rows, want about %v", n, r, f, s, want)
				}
			}
		}
		if reflect.DeepEqual(p.Fold[0], p.Fold[1]) {
			t.Errorf("n=%d: two repeats are the same split", n)
		}
		again, _ := NewRandom(n, 10, 3, 7, true)
		if !reflect.DeepEqual(p, again) {
			t.Errorf("n=%d: the same seed gave another plan", n)
		}
		other, _ := NewRandom(n, 10, 3, 8, true)
		if reflect.DeepEqual(p.Fold, other.Fold) {
			t.Errorf("n=%d: another seed gave the same plan", n)
		}
	}
}

func TestRefusals(t *testing.T) {
	if _, err := NewRandom(5, 10, 1, 1, true); err == nil {
		t.Error("5 rows filled 10 folds")
	}
	if _, err := NewRandom(50, 1, 1, 1, true); err == nil {
		t.Error("one fold was accepted")
	}
	if _, err := NewRandom(50, 5, 0, 1, true); err == nil {
		t.Error("no repeat was accepted")
	}
	if _, err := NewLeaveOneOut(1); err == nil {
		t.Error("one row was accepted")
	}
	if _, err := FromLabels([][]string{{"a", "a"}}); err == nil {
		t.Error("one label was accepted")
	}
	p, err := FromLabels([][]string{{"b", "a", "b", "c"}})
	if err != nil || p.Of(0, 0) != 0 || p.Of(0, 1) != 1 || p.Of(0, 2) != 0 || p.Of(0, 3) != 2 || p.Count != 3 {
		t.Errorf("labels: %v %v", p, err)
	}
}

// TestColumnsShareCells: rows that share their fold in every column share a cell, and only those.
func TestColumnsShareCells(t *testing.T) {
	p, err := FromLabels([][]string{{"a", "a", "b", "b", "a"}, {"x", "y", "x", "x", "x"}})
	if err != nil {
		t.Fatal(err)
	}
	if p.Cells != 3 || p.Cell[0] != p.Cell[4] || p.Cell[2] != p.Cell[3] || p.Cell[0] == p.Cell[1] {
		t.Errorf("cells %v", p.Cell)
	}
	for i, want := range [][2]int{{0, 0}, {0, 1}, {1, 0}, {1, 0}, {0, 0}} {
		if p.Of(0, i) != want[0] || p.Of(1, i) != want[1] {
			t.Errorf("row %d has folds %d and %d, want %v", i, p.Of(0, i), p.Of(1, i), want)
		}
	}
}
