package folds

import (
	"fmt"
	"math/rand/v2"
)

// Kinds of split that keep what belongs together together.
const (
	Clusters Kind = "clusters" // whole clusters are held out
	Blocks   Kind = "blocks"   // contiguous periods are held out
	Rolling  Kind = "rolling"  // the next periods are held out; only earlier ones are learned on
)

// NewClusters deals whole clusters into count folds, repeats times: row i belongs to cluster[i], one of clusters, counted from 0. Clusters come in
// random order and go each to the fold with the fewest rows so far.
//
// It returns an error when count < 2, repeats < 1 or there are fewer clusters than folds.
func NewClusters(cluster []int32, clusters, count, repeats int, seed int64) (*Plan, error) {
	switch {
	case count < 2:
		return nil, fmt.Errorf("folds: %d asked for, at least 2 are needed", count)
	case repeats < 1:
		return nil, fmt.Errorf("folds: %d repeats asked for, at least 1 is needed", repeats)
	case clusters < count:
		return nil, fmt.Errorf("folds: %d clusters cannot fill %d folds; ask for at most %d", clusters, count, clusters)
	}
	size := make([]int, clusters)
	for _, c := range cluster {
		size[c]++
	}
	p := &Plan{Kind: Clusters, Count: count, Repeats: repeats, Cells: clusters, Cell: cluster}
	for r := range repeats {
		fold := make([]int32, clusters)
		rows := make([]int, count)
		for k, c := range rand.New(rand.NewPCG(uint64(seed), 0xc105e<<16|uint64(r))).Perm(clusters) {
			best := 0
			for f := range rows {
				if rows[f] < rows[best] {
					best = f
				}
			}
			if k < count { // no fold stays empty, whatever the sizes
				best = k
			}
			fold[c] = int32(best)
			rows[best] += size[c]
		}
		p.Fold = append(p.Fold, fold)
		p.Counts = append(p.Counts, count)
	}
	return p, nil
}

// stretches cuts periods 0..periods-1 into count contiguous stretches with about the same number of rows each, none empty; it returns the stretch of
// each period.
func stretches(period []int32, periods, count int) []int32 {
	rows := make([]int, periods)
	for _, t := range period {
		rows[t]++
	}
	out := make([]int32, periods)
	f, seen := 0, 0
	for t := range periods {
		left := periods - t // periods not placed yet
		switch {
		case t > 0 && f < count-1 && left <= count-1-f:
			f++ // each of the remaining stretches needs one of the remaining periods
		case t > 0 && f < count-1 && out[t-1] == int32(f) && 2*(seen*count-(f+1)*len(period))+rows[t]*count > 0:
			f++ // more than half of this period lies beyond the end of the stretch
		}
		out[t] = int32(f)
		seen += rows[t]
	}
	return out
}

// NewBlocks holds out contiguous stretches of time, count of them with about as many rows each: row i is of period[i], counted from 0 in time order.
//
// It returns an error when count < 2 or there are fewer periods than folds.
func NewBlocks(period []int32, periods, count int) (*Plan, error) {
	if count < 2 {
		return nil, fmt.Errorf("folds: %d asked for, at least 2 are needed", count)
	}
	if periods < count {
		return nil, fmt.Errorf("folds: %d periods cannot fill %d blocks; ask for at most %d", periods, count, periods)
	}
	return &Plan{Kind: Blocks, Count: count, Repeats: 1, Counts: []int{count}, Cells: periods, Cell: period, Fold: [][]int32{stretches(period, periods, count)}}, nil
}

// Window says which rows a rolling split learns on: segments of time, each predicted from the pieces before it. Fold[0] of the plan gives pieces, in
// time order.
type Window struct {
	// First is the first segment that is held out; those before it serve for tuning.
	First int
	// By segment: its pieces From..To-1 are held out, pieces 0..Before-1 are learned on.
	From, To, Before []int
	Gap              int // periods left out between them
}

// Segments is the number of segments of a rolling split with so many folds: half as many again, and one, come before the first fold.
func Segments(count int) int { return count + count/2 + 1 }

// NewRolling predicts the last count segments of time, each from everything earlier, less gap periods: row i is of period[i], counted from 0 in
// time order.
//
// It returns an error when count < 1, gap < 0, there are fewer periods than Segments(count), or the gap leaves a held-out segment without earlier rows.
func NewRolling(period []int32, periods, count, gap int) (*Plan, error) {
	if count < 1 || gap < 0 {
		return nil, fmt.Errorf("folds: %d rolling folds with a gap of %d asked for; at least 1 fold and a gap of at least 0 are needed", count, gap)
	}
	segments := Segments(count)
	if periods < segments {
		most := 0
		for Segments(most+1) <= periods {
			most++
		}
		return nil, fmt.Errorf("folds: %d periods cannot hold %d rolling folds and the %d segments before them; ask for at most %d", periods, count, segments-count, most)
	}
	of := stretches(period, periods, segments)
	start := make([]int, segments)
	for t := periods - 1; t >= 0; t-- {
		start[of[t]] = t
	}
	if start[1] <= gap {
		return nil, fmt.Errorf("folds: a gap of %d periods leaves nothing to learn on before period %d; ask for a smaller gap", gap, start[1]+1)
	}
	// A piece begins wherever a segment begins or training ends.
	begins := make([]bool, periods+1)
	for s, t := range start {
		begins[t] = true
		if s > 0 {
			begins[t-gap] = true
		}
	}
	piece := make([]int32, periods)
	pieces := 0
	for t := range periods {
		if begins[t] && t > 0 {
			pieces++
		}
		piece[t] = int32(pieces)
	}
	pieces++
	w := &Window{First: segments - count, From: make([]int, segments), To: make([]int, segments), Before: make([]int, segments), Gap: gap}
	for s, t := range start {
		w.From[s], w.To[s] = int(piece[t]), pieces
		if s > 0 {
			w.To[s-1] = w.From[s]
			w.Before[s] = int(piece[t-gap])
			if gap == 0 {
				w.Before[s] = w.From[s]
			}
		}
	}
	return &Plan{Kind: Rolling, Count: count, Repeats: 1, Counts: []int{pieces}, Cells: periods, Cell: period, Fold: [][]int32{piece}, Window: w}, nil
}

// Held returns the fold in which a row is held out in a repeat, -1 where it never is.
func (p *Plan) Held(repeat, row int) int {
	f := p.Of(repeat, row)
	if p.Window == nil {
		return f
	}
	w := p.Window
	for s := w.First; s < len(w.From); s++ {
		if f >= w.From[s] && f < w.To[s] {
			return s - w.First
		}
	}
	return -1
}
