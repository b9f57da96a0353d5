package folds

import (
	"reflect"
	"testing"
)

func TestRandomIsBalancedSeededAndDiffersByRepeat(t *testing.T) {
	for _, n := range []int{10, 57, 534, 90_001} {
		p, err := NewRandom(n, 10, 3, 7)
		if err != nil {
			t.Fatal(err)
		}
		for r, a := range p.Assignment {
			sizes := make([]int, 10)
			for _, f := range a {
				sizes[f]++
			}
			for f, s := range sizes {
				if want := float64(n) / 10; float64(s) < want-4 || float64(s) > want+4 {
					t.Errorf("n=%d repeat %d fold %d holds %d rows, want about %v", n, r, f, s, want)
				}
			}
		}
		if reflect.DeepEqual(p.Assignment[0], p.Assignment[1]) {
			t.Errorf("n=%d: two repeats are the same split", n)
		}
		again, _ := NewRandom(n, 10, 3, 7)
		if !reflect.DeepEqual(p, again) {
			t.Errorf("n=%d: the same seed gave another plan", n)
		}
		other, _ := NewRandom(n, 10, 3, 8)
		if reflect.DeepEqual(p.Assignment, other.Assignment) {
			t.Errorf("n=%d: another seed gave the same plan", n)
		}
	}
}

func TestRefusals(t *testing.T) {
	if _, err := NewRandom(5, 10, 1, 1); err == nil {
		t.Error("5 rows filled 10 folds")
	}
	if _, err := NewRandom(50, 1, 1, 1); err == nil {
		t.Error("one fold was accepted")
	}
	if _, err := NewRandom(50, 5, 0, 1); err == nil {
		t.Error("no repeat was accepted")
	}
	if _, err := NewLeaveOneOut(1); err == nil {
		t.Error("one row was accepted")
	}
	if _, err := FromLabels([][]string{{"a", "a"}}); err == nil {
		t.Error("one label was accepted")
	}
	p, err := FromLabels([][]string{{"b", "a", "b", "c"}})
	if err != nil || !reflect.DeepEqual(p.Assignment[0], []int32{0, 1, 0, 2}) || p.Count != 3 {
		t.Errorf("labels: %v %v", p, err)
	}
}
