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

// Plan gives each of n rows a cell, and each cell a fold in each repeat: rows of one cell stay together, so that a reduction needs to keep
// one set of moments a cell, whatever the number of repeats. Cells are counted from 0. Counts[repeat] is the number of folds.
type Plan struct {
	Kind    Kind
	Count   int // folds in each repeat; the largest where fold columns differ
	Counts  []int
	Repeats int
	Cells   int
	Cell    []int32   // by row
	Fold    [][]int32 // [repeat][cell]
	Window  *Window   // of a rolling split: Fold then gives pieces of time, and Counts their number
}

// Of returns the fold of a row in a repeat.
func (p *Plan) Of(repeat, row int) int { return int(p.Fold[repeat][p.Cell[row]]) }

// Exact is the number of rows up to which a random split draws every row on its own: each row is a cell. Beyond, rows are dealt at random
// into Groups cells and the cells into folds.
const Exact = 10000

// Groups is the number of cells of a large random split.
const Groups = 1000

// Block is the number of rows that are dealt into cells together: each block gives every cell the same number of rows.
const Block = 4 * Groups

// MostFolds is the number of folds up to which a large split is dealt in cells.
const MostFolds = Groups / 2

// NewRandom splits n rows into count balanced folds, repeats times; celled allows the rows of a large table to be dealt in cells. The same n, count, repeats and seed give the same plan.
// Fold sizes differ by at most one row, where rows are dealt in cells by about one cell (a thousandth of the rows).
//
// It returns an error when count < 2, repeats < 1 or n < count.
func NewRandom(n, count, repeats int, seed int64, celled bool) (*Plan, error) {
	if count < 2 {
		return nil, fmt.Errorf("folds: %d asked for, at least 2 are needed", count)
	}
	if repeats < 1 {
		return nil, fmt.Errorf("folds: %d repeats asked for, at least 1 is needed", repeats)
	}
	if n < count {
		return nil, fmt.Errorf("folds: %d rows cannot fill %d folds; ask for at most %d", n, count, n)
	}
	p := &Plan{Kind: Random, Count: count, Repeats: repeats, Cells: n, Cell: make([]int32, n)}
	if celled && n > Exact && count <= MostFolds {
		p.Cells = Groups
		d := NewDealer(seed)
		for start := 0; start < n; start += Block {
			d.Deal(p.Cell[start:min(start+Block, n)])
		}
	} else {
		for i := range p.Cell {
			p.Cell[i] = int32(i)
		}
	}
	p.draw(seed)
	return p, nil
}

// NewDealt is the plan of NewRandom for rows that a Dealer has dealt into cells; Cell is left empty.
func NewDealt(count, repeats int, seed int64) *Plan {
	p := &Plan{Kind: Random, Count: count, Repeats: repeats, Cells: Groups}
	p.draw(seed)
	return p
}

func (p *Plan) draw(seed int64) {
	for r := range p.Repeats {
		fold := make([]int32, p.Cells)
		deal(fold, p.Count, rand.New(rand.NewPCG(uint64(seed), 0xf01d5<<16|uint64(r))))
		p.Fold = append(p.Fold, fold)
		p.Counts = append(p.Counts, p.Count)
	}
}

// Dealer deals rows into the cells of a large random split, Block rows at a time.
type Dealer struct{ rng *rand.Rand }

// NewDealer starts at the first row.
func NewDealer(seed int64) *Dealer {
	return &Dealer{rand.New(rand.NewPCG(uint64(seed), 0xce11))}
}

// Deal gives the next rows their cells: Block of them, fewer only at the end of the table.
func (d *Dealer) Deal(cell []int32) { deal(cell, Groups, d.rng) }

// deal gives each place one of so many hands, as evenly as the number of places allows, in random order.
func deal(places []int32, hands int, rng *rand.Rand) {
	for i := range places {
		places[i] = int32(i % hands)
	}
	rng.Shuffle(len(places), func(i, j int) { places[i], places[j] = places[j], places[i] })
}

// NewLeaveOneOut holds out each of n rows in turn; n must be at least 2.
func NewLeaveOneOut(n int) (*Plan, error) {
	if n < 2 {
		return nil, fmt.Errorf("folds: leaving one out needs at least 2 rows, found %d", n)
	}
	each := make([]int32, n)
	for i := range each {
		each[i] = int32(i)
	}
	return &Plan{Kind: LeaveOneOut, Count: n, Repeats: 1, Counts: []int{n}, Cells: n, Cell: each, Fold: [][]int32{each}}, nil
}

// FromLabels takes the folds from columns, one column a repeat: rows with equal labels share a fold. Folds are
// numbered in order of first appearance.
//
// It returns an error when a column has fewer than two distinct labels or columns differ in length.
func FromLabels(columns [][]string) (*Plan, error) {
	if len(columns) == 0 {
		return nil, fmt.Errorf("folds: kind column needs the name of at least one column")
	}
	p := &Plan{Kind: Column, Repeats: len(columns), Cell: make([]int32, len(columns[0]))}
	cells := map[string]int32{}
	var first []int // the first row of each cell
	folds := make([][]int32, len(columns))
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
		folds[c] = assign
		if len(seen) < 2 {
			return nil, fmt.Errorf("folds: fold column %d of %d has %d distinct value, at least 2 are needed", c+1, len(columns), len(seen))
		}
		p.Counts = append(p.Counts, len(seen))
		p.Count = max(p.Count, len(seen))
	}
	// Rows that share their fold in every column share a cell.
	for i := range p.Cell {
		key := ""
		for c := range folds {
			key += fmt.Sprintf("%d ", folds[c][i])
		}
		k, ok := cells[key]
		if !ok {
			k = int32(len(cells))
			cells[key] = k
			first = append(first, i)
		}
		p.Cell[i] = k
	}
	p.Cells = len(cells)
	for c := range folds {
		fold := make([]int32, p.Cells)
		for k, row := range first {
			fold[k] = folds[c][row]
		}
		p.Fold = append(p.Fold, fold)
	}
	return p, nil
}
