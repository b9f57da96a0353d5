package compare

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"

	"modelmend/fit/figures"
	"modelmend/fit/folds"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// DefaultResamples is the number of resamples of a study that names none.
const DefaultResamples = 999

// Resampling says how the whole procedure was repeated on resampled rows.
type Resampling struct {
	Count int // resamples; 0: none
	Kind  string
	Units int // how many there are to draw from
	Block int // periods in a block
	Folds int // inner folds in which tuning is re-chosen
	// Deletions is the number of delete-a-group fits behind the acceleration.
	Deletions int
}

// The kinds of resampling.
const (
	DrawRows     = "rows"
	DrawGroups   = "groups of rows"
	DrawClusters = "clusters"
	DrawBlocks   = "blocks of periods"
)

// Resampled is the spread of one coefficient when the whole procedure, tuning and selection included, is repeated on resampled rows.
type Resampled struct {
	SE           float64 // standard deviation over the resamples
	Low, High    float64 // percentile interval, 95 %
	AccLow       float64 // bias-corrected and accelerated interval, NaN where it cannot be formed
	AccHigh      float64
	Positive     float64 // share of resamples with this sign
	Negative     float64
	Used         int // resamples in which the coefficient had a value
	Acceleration float64
	BiasOffset   float64 // z0: the normal quantile of the share of resamples below the estimate
}

// Zero is the share of resamples in which the coefficient was set to zero, NaN where there are fewer than two.
func (r *Resampled) Zero() float64 {
	if r.Used < 2 {
		return math.NaN()
	}
	if v := 1 - r.Positive - r.Negative; v > 1e-9 { // the shares are sums of 1/n
		return v
	}
	return 0
}

// TuningResampled is how often each value of a tuning was chosen.
type TuningResampled struct {
	Shares            []float64 // by place in Tuning.Values; the rest up to 1 lies beyond them
	Low, Median, High float64   // 2.5, 50 and 97.5 % of the chosen values
}

// mostTuningFolds bounds the folds of one resample: leaving one out of many rows would learn every tuning as many times.
const mostTuningFolds = 60

// mostDeletions bounds the fits behind the acceleration; more units are deleted in groups.
const mostDeletions = 200

// batch is how many resamples are summed together.
const batch = 8

// rowSource sums drawn units again into training rows with their inner splits.
type rowSource struct {
	kind  string
	units int // what is drawn
	block int // length of the blocks of neighbouring units that are drawn together; 1: each by itself
	folds int
	// parts without sums; light is nil where they are in double-double.
	window *folds.Window
	light  *reduction.Units
	heavy  func(weight []float64) *reduction.Reduction

	unit, of []int32 // by row used: its unit and its fold; nil where groups were dealt in passing
}

// own gives the same draws of the rows of a variant that has its own.
func (s *rowSource) own(o *ownRows) *rowSource {
	pick := func(v []int32) []int32 {
		out := make([]int32, len(o.index))
		for k, i := range o.index {
			out[k] = v[i]
		}
		return out
	}
	all := make([]reduction.Column, len(o.cols))
	for j, c := range o.cols {
		all[j] = picked(c, o.index)
	}
	unit, of := pick(s.unit), pick(s.of)
	out := &rowSource{kind: s.kind, units: s.units, block: s.block, folds: s.folds, window: s.window}
	if linear.EnoughForLight(o.sample, resamplesLight) {
		out.light = reduction.NewUnits(o.red, all, unit, s.units, of, s.folds)
	} else {
		out.heavy = func(w []float64) *reduction.Reduction { return o.red.Weighted(all, unit, of, s.folds, w) }
	}
	return out
}

// weighted gives the parts of several weightings of the units.
func (s *rowSource) weighted(weights [][]float64) []*parts {
	out := make([]*parts, len(weights))
	if s.light == nil {
		for b, w := range weights {
			red := s.heavy(w)
			out[b] = &parts{red: red, moments: red.Parts[0], window: s.window}
		}
		return out
	}
	for b, sums := range s.light.Sum(weights) {
		out[b] = &parts{units: s.light, sums: sums, window: s.window}
	}
	return out
}

// ones counts every unit once.
func (s *rowSource) ones() []float64 {
	w := make([]float64, s.units)
	for i := range w {
		w[i] = 1
	}
	return w
}

// rowSource decides what is drawn: whole clusters where the study declares them, blocks of neighbouring periods where it declares time, else rows up
// to folds.Exact of them (or where groups would not fit into memory), beyond that groups of rows dealt at random. A row keeps its fold of the first
// repeat in every resample, so that copies of a row never lie on both sides of a split.
func (c *Comparison) rowSource(red *reduction.Reduction) *rowSource {
	light := linear.EnoughForLight(c.Problem.Sample, resamplesLight)
	fold, count := c.Plan.Fold[0], c.Plan.Counts[0]
	s := &rowSource{units: len(red.Groups), folds: count, kind: DrawGroups, block: 1, window: c.Plan.Window}
	if c.Plan.Kind == folds.Random && red.Groups != nil && len(c.Clusters) == 0 && c.Periods == nil {
		if light {
			s.light = reduction.GroupUnits(red, red.Groups, fold, count)
		} else {
			s.heavy = func(w []float64) *reduction.Reduction { return red.WeightedGroups(fold, count, w) }
		}
		return s
	}
	n := c.Design.Rows
	of := make([]int32, n)
	for i := range of {
		of[i] = fold[c.Plan.Cell[i]]
	}
	if count > mostTuningFolds && s.window == nil {
		if p, err := c.plan(FoldSpec{Kind: c.Study.keptTogether(), Count: 10, Repeats: 1}); err == nil && p.Window == nil {
			s.folds = 10
			for i := range of {
				of[i] = int32(p.Of(0, i))
			}
		}
	}
	var unit []int32
	switch {
	case len(c.Clusters) > 0:
		s.kind, s.units, unit = DrawClusters, c.Clusters[0].Count, c.Clusters[0].Of
	case c.Periods != nil:
		s.kind, s.units, unit = DrawBlocks, c.Periods.Count, c.Periods.Of
		s.block = blockLength(s.units)
	default:
		s.kind, s.units, unit = c.rowUnits(of, s.folds, red.P)
	}
	s.unit, s.of = unit, of
	cols := append(append([]reduction.Column{}, c.Design.Columns()...), c.Design.Y)
	if light {
		s.light = reduction.NewUnits(red, cols, unit, s.units, of, s.folds)
	} else {
		s.heavy = func(w []float64) *reduction.Reduction { return red.Weighted(cols, unit, of, s.folds, w) }
	}
	return s
}

// rowUnits makes every row a unit, or deals the rows of each fold into groups.
func (c *Comparison) rowUnits(of []int32, count, p int) (kind string, units int, unit []int32) {
	n := len(of)
	unit = make([]int32, n)
	groups := min(folds.Groups, (1<<27)/(8*reduction.Width(p+1)))
	if n <= folds.Exact || groups < 200 {
		for i := range unit {
			unit[i] = int32(i)
		}
		return DrawRows, n, unit
	}
	at := make([]int, count)
	for _, k := range rand.New(rand.NewPCG(uint64(c.Study.Seed), 0x9a0b5)).Perm(n) {
		f := int(of[k])
		// The groups of fold f are f, f+count, f+2 count, ...
		unit[k] = int32(f + count*(at[f]%((groups-f+count-1)/count)))
		at[f]++
	}
	return DrawGroups, groups, unit
}

// draw gives the number of times that each unit is drawn in resample b, from a random stream of its own: as many draws as units, with replacement;
// or blocks of neighbouring units from random starts, as many units in all.
//
// Source of the moving blocks: Künsch (1989), Annals of Statistics 17(3), 1217-1241.
func draw(seed int64, b, units, block int) []float64 {
	w := make([]float64, units)
	rng := rand.New(rand.NewPCG(uint64(seed), 0xb0075<<32|uint64(b)))
	for left := units; left > 0; left -= block {
		at := rng.IntN(units - block + 1)
		for k := range min(block, left) {
			w[at+k]++
		}
	}
	return w
}

// deletions leaves out one group of units after the other, the fits behind the acceleration: groups dealt at random, or neighbours where blocks are
// drawn.
func deletions(seed int64, units, block int) [][]float64 {
	groups := min((units+block-1)/block, mostDeletions)
	out := make([][]float64, groups)
	for g := range out {
		out[g] = make([]float64, units)
		for i := range out[g] {
			out[g][i] = 1
		}
	}
	if block > 1 {
		for i := range units {
			out[i*groups/units][i] = 0
		}
		return out
	}
	perm := rand.New(rand.NewPCG(uint64(seed), 0xde1e7e)).Perm(units)
	for i, k := range perm {
		out[i%groups][k] = 0
	}
	return out
}

// replicates holds what every alternative gave in every resample.
type replicates struct {
	q      int
	values [][]float64 // [alternative][resample*q + coefficient]: (constant, slopes); NaN where not identified
	chosen [][]float64 // [alternative][resample]: the value of the tuning, NaN without
}

func newReplicates(alternatives, count, q int) *replicates {
	r := &replicates{q: q, values: make([][]float64, alternatives), chosen: make([][]float64, alternatives)}
	for i := range r.values {
		r.values[i] = make([]float64, count*q)
		r.chosen[i] = make([]float64, count)
	}
	return r
}

// learn puts every choice, learned on its training rows, at place b: those of own where it has some, else shared.
func (r *replicates) learn(choices []choice, shared remedy.Training, own map[int]remedy.Training, b int) {
	for i, ch := range choices {
		t, has := own[i]
		if !has {
			t = shared
		}
		fit := ch.variant.Learn(t)
		to := r.values[i][b*r.q : (b+1)*r.q]
		k := r.q - len(fit.Slopes)
		if k == 1 {
			to[0] = t.Sample.ConstantFor(fit.Slopes)
		}
		copy(to[k:], fit.Slopes)
		for j, st := range fit.Status {
			if st == remedy.NotIdentified {
				to[k+j] = math.NaN()
			}
		}
		r.chosen[i][b] = math.NaN()
		if fit.Tuning != nil {
			r.chosen[i][b] = fit.Tuning.Values[fit.Tuning.Chosen]
		}
	}
}

// resample repeats the whole procedure and fills in the spread of every coefficient.
func (c *Comparison) resample(ctx context.Context, red *reduction.Reduction, choices []choice, opt Options) error {
	count := c.Study.Resamples
	if count <= 0 {
		return nil
	}
	source := c.rowSource(red)
	c.Resampling = Resampling{Count: count, Kind: source.kind, Units: source.units, Block: source.block, Folds: source.folds}
	if source.units < 2 {
		return nil
	}
	deleted := deletions(c.Study.Seed, source.units, source.block)
	c.Resampling.Deletions = len(deleted)
	q := red.P
	if red.Constant {
		q++
	}
	own := map[int]*rowSource{}
	for i, a := range c.Alternatives {
		if a.own != nil {
			own[i] = source.own(a.own)
		}
	}
	drawn := newReplicates(len(choices), count, q)
	jack := newReplicates(len(choices), len(deleted), q)
	total := count + len(deleted)
	var mu sync.Mutex
	done := 0
	err := each(ctx, (total+batch-1)/batch, opt.Workers, func(k int) {
		var weights [][]float64
		for b := k * batch; b < min(total, (k+1)*batch); b++ {
			if b < count {
				weights = append(weights, draw(c.Study.Seed, b, source.units, source.block))
			} else {
				weights = append(weights, deleted[b-count])
			}
		}
		apart := map[int][]*parts{}
		for i, s := range own {
			apart[i] = s.weighted(weights)
		}
		for i, p := range source.weighted(weights) {
			if ctx.Err() != nil {
				return
			}
			t := map[int]remedy.Training{}
			for j, list := range apart {
				t[j] = list[i].whole()
			}
			if b := k*batch + i; b < count {
				drawn.learn(choices, p.whole(), t, b)
			} else {
				jack.learn(choices, p.whole(), t, b-count)
			}
		}
		if opt.Progress != nil {
			mu.Lock()
			done += len(weights)
			opt.Progress("resamples learned", done, total)
			mu.Unlock()
		}
	})
	if err != nil {
		return err
	}
	return each(ctx, len(c.Alternatives), opt.Workers, func(i int) {
		a := c.Alternatives[i]
		for _, list := range [][]Coefficient{a.Coefficients, a.Derived} {
			for j := range list {
				list[j].Resampled = spread(&list[j], drawn.combine(i, list[j].weights), jack.combine(i, list[j].weights))
			}
		}
		a.noteKept()
		if t := a.Fitted.Tuning; t != nil && !t.Fixed {
			a.TuningResampled = tuned(t.Values, drawn.chosen[i])
		}
	})
}

// noteKept says how often each regressor was kept, where some are set to zero in some resamples and kept in others.
func (a *Alternative) noteKept() {
	var parts []string
	changes := false
	for _, k := range a.Coefficients {
		if k.Resampled == nil || k.Resampled.Used < 2 || k.Name == "constant" {
			continue
		}
		z := k.Resampled.Zero()
		changes = changes || (z > 0 && z < 1)
		parts = append(parts, k.Name+" "+figures.Percent(1-z))
	}
	if changes {
		a.Description.Notes = append(a.Description.Notes, remedy.Note{Code: "kept-in-resamples", Text: "kept in so many of the resamples: " + strings.Join(parts, ", ")})
	}
}

// combine gives the combination w of (constant, slopes) in every resample of alternative i.
func (r *replicates) combine(i int, w []float64) []float64 {
	n := len(r.chosen[i])
	out := make([]float64, n)
	for j, x := range w {
		if x == 0 {
			continue
		}
		for b := range out {
			out[b] += x * r.values[i][b*r.q+j]
		}
	}
	return out
}

// spread sums up the resampled values of a coefficient; nil where it has no value of its own.
func spread(c *Coefficient, values, deleted []float64) *Resampled {
	if c.Status == remedy.NotIdentified {
		return nil
	}
	v := make([]float64, 0, len(values))
	for _, x := range values {
		if !math.IsNaN(x) {
			v = append(v, x)
		}
	}
	nan := math.NaN()
	r := &Resampled{SE: nan, Low: nan, High: nan, AccLow: nan, AccHigh: nan, Used: len(v), Acceleration: nan, BiasOffset: nan}
	if len(v) < 2 {
		return r
	}
	slices.Sort(v)
	n := float64(len(v))
	mean, below := 0.0, 0.0
	negative, positive := 0, 0
	for _, x := range v {
		mean += x / n
		switch {
		case x < 0:
			negative++
		case x > 0:
			positive++
		}
		switch {
		case x < c.Estimate:
			below++
		case x == c.Estimate:
			below += 0.5
		}
	}
	r.Negative, r.Positive = float64(negative)/n, float64(positive)/n
	ss := 0.0
	for _, x := range v {
		ss += (x - mean) * (x - mean)
	}
	r.SE = math.Sqrt(ss / (n - 1))
	if len(v) < 39 { // no 2.5 % point lies inside
		return r
	}
	r.Low, r.High = quantile(v, 0.025), quantile(v, 0.975)
	r.BiasOffset = tail.NormalQuantile(below / n)
	r.Acceleration = acceleration(deleted)
	r.AccLow, r.AccHigh = accelerated(v, r.BiasOffset, r.Acceleration)
	return r
}

// quantile returns the p-th quantile of sorted values: order statistic (n+1)p, between neighbours in proportion.
func quantile(sorted []float64, p float64) float64 {
	n := len(sorted)
	h := p*float64(n+1) - 1
	if h <= 0 {
		return sorted[0]
	}
	if h >= float64(n-1) {
		return sorted[n-1]
	}
	i := int(h)
	f := h - float64(i)
	if f == 0 {
		return sorted[i]
	}
	return sorted[i] + f*(sorted[i+1]-sorted[i])
}

// acceleration is sum d^3 / (6 (sum d^2)^1.5) with d the mean of the delete-a-group values less each of them.
//
// Source: Efron (1987), Journal of the American Statistical Association 82(397), 171-185, with the jackknife for the influence of each unit.
func acceleration(deleted []float64) float64 {
	mean, n := 0.0, 0.0
	for _, v := range deleted {
		if !math.IsNaN(v) {
			mean += v
			n++
		}
	}
	if n < 2 {
		return math.NaN()
	}
	mean /= n
	var two, three float64
	for _, v := range deleted {
		if d := mean - v; !math.IsNaN(d) {
			two += d * d
			three += d * d * d
		}
	}
	if two == 0 {
		return 0
	}
	return three / (6 * math.Pow(two, 1.5))
}

// accelerated returns the 95 % interval with bias correction z0 and acceleration a: the quantiles of the sorted values at
// Phi(z0 + (z0+z)/(1 - a (z0+z))), z the normal 2.5 and 97.5 % points; NaN where z0 is infinite, or a is so large that the formula turns over.
//
// Source: Efron (1987), Journal of the American Statistical Association 82(397), 171-185.
func accelerated(sorted []float64, z0, a float64) (low, high float64) {
	if math.IsInf(z0, 0) || math.IsNaN(z0+a) {
		return math.NaN(), math.NaN()
	}
	at := func(p float64) float64 {
		z := z0 + tail.NormalQuantile(p)
		d := 1 - a*z
		if d <= 0 {
			return math.NaN()
		}
		return quantile(sorted, tail.Normal(z0+z/d))
	}
	low, high = at(0.025), at(0.975)
	if math.IsNaN(low + high) {
		return math.NaN(), math.NaN()
	}
	return low, high
}

// tuned counts the chosen values.
func tuned(values, chosen []float64) *TuningResampled {
	t := &TuningResampled{Shares: make([]float64, len(values))}
	sorted := slices.Clone(chosen)
	slices.Sort(sorted)
	for _, v := range sorted {
		if i := slices.Index(values, v); i >= 0 {
			t.Shares[i]++
		}
	}
	for i := range t.Shares {
		t.Shares[i] /= float64(len(sorted))
	}
	t.Low, t.Median, t.High = quantile(sorted, 0.025), quantile(sorted, 0.5), quantile(sorted, 0.975)
	return t
}

// Sentence says how the resamples were drawn.
func (r Resampling) Sentence() string {
	if r.Count == 0 {
		return "The procedure was not resampled."
	}
	var what string
	switch r.Kind {
	case DrawRows:
		what = fmt.Sprintf("%d rows drawn with replacement", r.Units)
	case DrawGroups:
		what = fmt.Sprintf("%d groups of rows, dealt at random, drawn with replacement", r.Units)
	case DrawClusters:
		what = fmt.Sprintf("%d whole clusters drawn with replacement", r.Units)
	case DrawBlocks:
		what = fmt.Sprintf("%d periods, drawn with replacement in blocks of %d neighbours", r.Units, r.Block)
	}
	return fmt.Sprintf("%d resamples, each of %s; a row keeps its fold, and tuning is chosen again in each by %d-fold cross-validation.", r.Count, what, r.Folds)
}
