package folds

import (
	"math/rand/v2"
	"testing"
)

func TestClustersStayWhole(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	var cluster []int32
	for c := range 37 {
		for range 1 + rng.IntN(9) {
			cluster = append(cluster, int32(c))
		}
	}
	rng.Shuffle(len(cluster), func(i, j int) { cluster[i], cluster[j] = cluster[j], cluster[i] })
	p, err := NewClusters(cluster, 37, 5, 3, 9)
	if err != nil {
		t.Fatal(err)
	}
	differ := false
	for r := range 3 {
		fold := map[int32]int{}
		rows := make([]int, 5)
		for i, c := range cluster {
			f, seen := fold[c]
			if !seen {
				fold[c] = p.Of(r, i)
				f = fold[c]
			}
			if f != p.Of(r, i) || f != p.Held(r, i) {
				t.Fatalf("repeat %d: cluster %d lies in folds %d and %d", r, c, f, p.Of(r, i))
			}
			rows[f]++
			differ = differ || p.Of(r, i) != p.Of(0, i)
		}
		for f, n := range rows {
			if n < len(cluster)/5-9 || n > len(cluster)/5+9 {
				t.Errorf("repeat %d fold %d holds %d of %d rows", r, f, n, len(cluster))
			}
		}
	}
	if !differ {
		t.Error("all repeats are the same split")
	}
	if _, err := NewClusters([]int32{0, 1, 1}, 2, 3, 1, 1); err == nil {
		t.Error("two clusters filled three folds")
	}
}

func TestBlocksAreContiguous(t *testing.T) {
	for _, c := range []struct{ periods, rows, count int }{{10, 1, 10}, {40, 1, 10}, {12, 7, 5}, {13, 1, 6}} {
		var period []int32
		for k := range c.periods * c.rows {
			period = append(period, int32(k%c.periods))
		}
		p, err := NewBlocks(period, c.periods, c.count)
		if err != nil {
			t.Fatal(err)
		}
		of := make([]int, c.periods)
		size := make([]int, c.count)
		for i, tt := range period {
			of[tt] = p.Of(0, i)
			size[p.Of(0, i)]++
		}
		for k := 1; k < c.periods; k++ {
			if of[k] < of[k-1] || of[k] > of[k-1]+1 {
				t.Errorf("%+v: period %d lies in block %d after block %d", c, k, of[k], of[k-1])
			}
		}
		for f, n := range size {
			if n == 0 || float64(n) > 2*float64(len(period))/float64(c.count) {
				t.Errorf("%+v: block %d holds %d rows", c, f, n)
			}
		}
	}
	if _, err := NewBlocks([]int32{0, 1}, 2, 3); err == nil {
		t.Error("two periods filled three blocks")
	}
	// One period with most of the rows: no block is empty.
	period := make([]int32, 100)
	period[97], period[98], period[99] = 1, 2, 3
	p, err := NewBlocks(period, 4, 4)
	if err != nil {
		t.Fatal(err)
	}
	for k, i := range []int{0, 97, 98, 99} {
		if p.Of(0, i) != k {
			t.Errorf("period %d lies in block %d", k, p.Of(0, i))
		}
	}
}

// TestRollingLearnsOnThePast: every row that a fold learns on is earlier than the held-out ones by more than the gap, and all such rows are used.
func TestRollingLearnsOnThePast(t *testing.T) {
	for _, c := range []struct{ periods, count, gap int }{{30, 10, 0}, {60, 5, 3}, {17, 3, 1}, {200, 10, 12}, {16, 10, 0}} {
		period := make([]int32, 2*c.periods)
		for i := range period {
			period[i] = int32(i % c.periods)
		}
		p, err := NewRolling(period, c.periods, c.count, c.gap)
		if err != nil {
			t.Fatalf("%+v: %v", c, err)
		}
		w := p.Window
		if len(w.From)-w.First != c.count {
			t.Errorf("%+v: %d folds", c, len(w.From)-w.First)
		}
		for s := 1; s < len(w.From); s++ {
			firstHeld, lastLearned, held := int32(1<<30), int32(-1), 0
			for i, tt := range period {
				piece := p.Of(0, i)
				if piece >= w.From[s] && piece < w.To[s] {
					firstHeld = min(firstHeld, tt)
					held++
					if want := s - w.First; p.Held(0, i) != max(want, -1) && want >= 0 {
						t.Errorf("%+v: row of segment %d is said to be held out in fold %d", c, s, p.Held(0, i))
					}
				}
				if piece < w.Before[s] {
					lastLearned = max(lastLearned, tt)
				}
			}
			if held == 0 || lastLearned < 0 || int(firstHeld-lastLearned) != c.gap+1 {
				t.Errorf("%+v: segment %d: %d rows, learned up to period %d, held out from %d", c, s, held, lastLearned, firstHeld)
			}
		}
	}
	if _, err := NewRolling(make([]int32, 4), 4, 10, 0); err == nil {
		t.Error("four periods held ten rolling folds")
	}
	if _, err := NewRolling([]int32{0, 1, 2, 3, 4, 5, 6, 7, 8, 9}, 10, 2, 5); err == nil {
		t.Error("a gap that leaves nothing to learn on was accepted")
	}
}
