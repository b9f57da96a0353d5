// Package folds splits rows into held-out parts, the same for every remedy.
//
// A number of rows and a seed (or fold columns) go in; a Plan comes out that gives each row one fold in each
// repeat. It refuses fewer than two folds and folds that would be empty. It stands after dataset and before design.
package folds

import (
	"fmt"
	"math/rand/v2"
)

// Kind says how rows are split.
type Kind string

// The kinds of split of this version.
const (
	Random      Kind = "random"
	LeaveOneOut Kind = "leave-one-out"
	Column      Kind = "column"
)

// Plan gives each of n rows its fold: Assignment[repeat][row], counted from 0. Counts[repeat] is the number of folds.
type Plan struct {
	Kind       Kind
	Count      int // folds in each repeat; the largest where fold columns differ
	Counts     []int
	Repeats    int
	Assignment [][]int32
}

// chunk is the number of folds' worth of rows that are shuffled together: up to this many rows a fold, the split is
// one random permutation; beyond, consecutive chunks are permuted on their own, so that memory stays bounded and
// folds stay balanced.
const chunk = 4096

// NewRandom splits n rows into count balanced folds, repeats times. The same n, count, repeats and seed give the same plan;
// fold sizes differ by at most one a chunk.
//
// It returns an error when count < 2, repeats < 1 or n < count.
func NewRandom(n, count, repeats int, seed int64) (*Plan, error) {
	if count < 2 {
		return nil, fmt.Errorf("folds: %d asked for, at least 2 are needed", count)
	}
	if repeats < 1 {
		return nil, fmt.Errorf("folds: %d repeats asked for, at least 1 is needed", repeats)
	}
	if n < count {
		return nil, fmt.Errorf("folds: %d rows cannot fill %d folds; ask for at most %d", n, count, n)
	}
	p := &Plan{Kind: Random, Count: count, Repeats: repeats}
	for r := range repeats {
		rng := rand.New(rand.NewPCG(uint64(seed), 0xf01d5<<16|uint64(r)))
		assign := make([]int32, n)
		for start := 0; start < n; start += chunk * count {
			end := min(start+chunk*count, n)
			part := assign[start:end]
			for i := range part {
				part[i] = int32(i % count)
			}
			rng.Shuffle(len(part), func(i, j int) { part[i], part[j] = part[j], part[i] })
		}
		p.Assignment = append(p.Assignment, assign)
		p.Counts = append(p.Counts, count)
	}
	return p, nil
}

// NewLeaveOneOut holds out each of n rows in turn; n must be at least 2.
func NewLeaveOneOut(n int) (*Plan, error) {
	if n < 2 {
		return nil, fmt.Errorf("folds: leaving one out needs at least 2 rows, found %d", n)
	}
	assign := make([]int32, n)
	for i := range assign {
		assign[i] = int32(i)
	}
	return &Plan{Kind: LeaveOneOut, Count: n, Repeats: 1, Counts: []int{n}, Assignment: [][]int32{assign}}, nil
}

// FromLabels takes the folds from columns, one column a repeat: rows with equal labels share a fold. Folds are
// numbered in order of first appearance.
//
// It returns an error when a column has fewer than two distinct labels or columns differ in length.
func FromLabels(columns [][]string) (*Plan, error) {
	if len(columns) == 0 {
		return nil, fmt.Errorf("folds: kind column needs the name of at least one column")
	}
	p := &Plan{Kind: Column, Repeats: len(columns)}
	for c, labels := range columns {
		if len(labels) != len(columns[0]) {
			return nil, fmt.Errorf("folds: fold columns differ in length")
		}
		seen := map[string]int32{}
		assign := make([]int32, len(labels))
		for i, l := range labels {
			f, ok := seen[l]
			if !ok {
				f = int32(len(seen))
				seen[l] = f
			}
			assign[i] = f
		}
		if len(seen) < 2 {
			return nil, fmt.Errorf("folds: fold column %d of %d has %d distinct value, at least 2 are needed", c+1, len(columns), len(seen))
		}
		p.Assignment = append(p.Assignment, assign)
		p.Counts = append(p.Counts, len(seen))
		p.Count = max(p.Count, len(seen))
	}
	return p, nil
}
