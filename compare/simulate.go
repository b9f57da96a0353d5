package compare

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"

	"gonum.org/v1/gonum/stat/distuv"

	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// SimulationsBySize lets the number of simulated samples depend on the number of regressors: 1,000 a truth up to ten, then fewer with their square,
// never under 200.
const SimulationsBySize = -1

// Simulation says what was simulated at the user's own design.
type Simulation struct {
	Count  int     // samples for each truth; 0: none
	Folds  int     // inner folds in which tuning is chosen in each sample
	Truths []Truth // in order
	Reason string  // why there is none
}

// Truth is one set of slopes that the samples are drawn from.
type Truth struct {
	Name string // as-estimated | focal-zero | focal-smallest | halfway
	Text string

	slopes []float64
}

// The truths.
const (
	AsEstimated   = "as-estimated"
	FocalZero     = "focal-zero"
	FocalSmallest = "focal-smallest"
	Halfway       = "halfway"
)

// Simulated is what one alternative does to one coefficient over the samples of one truth; each figure with its Monte Carlo standard error.
type Simulated struct {
	Truth       string
	Coefficient string
	True        float64
	Bias        float64 // mean estimate less the true value
	SD          float64 // of the estimates
	RMSE        float64 // root mean squared distance to the true value
	Coverage    float64 // share of nominal 95 % intervals (given the tuning, classical) that hold the true value
	WrongSign   float64 // share of estimates with the other sign; NaN where the true value is zero

	BiasError, SDError, RMSEError, CoverageError, WrongSignError float64
}

// count is the number of samples a truth.
func (s *Study) simulations(p int) int {
	if s.Simulations != SimulationsBySize {
		return s.Simulations
	}
	return int(min(1000, max(200, math.Round(1000*100/float64(p*p)))))
}

// truths lists what the samples are drawn from.
func (c *Comparison) truths() []Truth {
	name := func(j int) string { return c.Problem.Names[j] }
	var names []string
	for _, j := range c.Focal {
		names = append(names, name(j))
	}
	b := c.AsIs.Slopes
	out := []Truth{{AsEstimated, "the slopes are those estimated when the model is left alone", slices.Clone(b)}}
	zero, half := slices.Clone(b), slices.Clone(b)
	for _, j := range c.Focal {
		zero[j] = 0
	}
	for j := range half {
		half[j] /= 2
	}
	out = append(out, Truth{FocalZero, "as estimated, but " + and(names) + " zero", zero})
	small := slices.Clone(b)
	var set []string
	for _, j := range c.Focal {
		if v := c.Smallest[j]; !math.IsNaN(v) {
			small[j] = math.Copysign(v, b[j])
			set = append(set, name(j)+" "+brief(small[j]))
		}
	}
	if len(set) > 0 {
		out = append(out, Truth{FocalSmallest, "as estimated, but at the smallest effect of interest: " + and(set), small})
	}
	return append(out, Truth{Halfway, "every slope is half of what is estimated", half})
}

func and(list []string) string {
	switch len(list) {
	case 0:
		return ""
	case 1:
		return list[0]
	}
	text := ""
	for i, s := range list {
		switch {
		case i == len(list)-1:
			text += " and "
		case i > 0:
			text += ", "
		}
		text += s
	}
	return text
}

// design is what simulation needs of the user's rows: the sums of every fold in the units' coordinates, and a root of the cross-products of
// [1 x] in each, so that X'e of independent normal errors can be drawn at a cost that does not depend on n.
type simulator struct {
	units *reduction.Units
	folds []simFold
	p, k  int // k: 1 with a constant
	sigma float64
}

type simFold struct {
	sums []float64
	root []float64 // (k+p) x rank
	rank int
	free float64 // degrees of freedom of the errors beside X: n_f - rank
	// By truth:
	xb  [][]float64 // X'X b, k+p
	bxb []float64   // b'X'X b
}

// newSimulator takes the folds of the tuning and the truths in the units' coordinates.
func (c *Comparison) newSimulator(u *reduction.Units, sums [][]float64, truths []Truth) *simulator {
	p := u.Q - 1
	s := &simulator{units: u, p: p, sigma: c.S / u.Scale[p]}
	if u.Constant {
		s.k = 1
	}
	m := s.k + p
	for _, fold := range sums {
		f := simFold{sums: fold}
		a := make([]float64, m*m)
		if s.k == 1 {
			a[0] = fold[0]
			for j := range p {
				a[1+j], a[(1+j)*m] = fold[1+j], fold[1+j]
			}
		}
		at := 1 + u.Q
		for i := range p {
			for j := i; j < p; j++ {
				v := fold[at+j-i]
				a[(s.k+i)*m+s.k+j], a[(s.k+j)*m+s.k+i] = v, v
			}
			at += u.Q - i
		}
		for _, t := range truths {
			b := make([]float64, m)
			for j := range p {
				b[s.k+j] = t.slopes[j] * u.Scale[j] / u.Scale[p]
			}
			xb := make([]float64, m)
			bxb := 0.0
			for i := range m {
				for j := range m {
					xb[i] += a[i*m+j] * b[j]
				}
				bxb += b[i] * xb[i]
			}
			f.xb = append(f.xb, xb)
			f.bxb = append(f.bxb, bxb)
		}
		f.root, f.rank = linear.Root(a, m)
		f.free = math.Max(0, fold[0]-float64(f.rank))
		s.folds = append(s.folds, f)
	}
	return s
}

// draw gives the sums of every fold for every truth, the same errors for all truths: [truth][fold].
func (s *simulator) draw(seed int64, d int, truths []Truth) [][][]float64 {
	src := rand.NewPCG(uint64(seed), 0x51a7<<32|uint64(d))
	rng := rand.New(src)
	m := s.k + s.p
	out := make([][][]float64, len(truths))
	for t := range out {
		out[t] = make([][]float64, len(s.folds))
	}
	xe := make([]float64, m)
	for fi, f := range s.folds {
		clear(xe)
		ee := 0.0
		for r := range f.rank {
			z := s.sigma * rng.NormFloat64()
			ee += z * z
			for i := range xe {
				xe[i] += f.root[i*f.rank+r] * z
			}
		}
		if f.free > 0 {
			ee += s.sigma * s.sigma * distuv.ChiSquared{K: f.free, Src: src}.Rand()
		}
		for t := range truths {
			v := slices.Clone(f.sums)
			s.put(v, f.xb[t], f.bxb[t], xe, ee, truths[t])
			out[t][fi] = v
		}
	}
	return out
}

// put writes the sums that hold the dependent variable, y = X b + e.
func (s *simulator) put(v, xb []float64, bxb float64, xe []float64, ee float64, t Truth) {
	q := s.p + 1
	if s.k == 1 {
		v[1+s.p] = xb[0] + xe[0]
	}
	at := 1 + q
	cross := 0.0
	for j := range s.p {
		v[at+s.p-j] = xb[s.k+j] + xe[s.k+j]
		cross += t.slopes[j] * s.units.Scale[j] / s.units.Scale[s.p] * xe[s.k+j]
		at += q - j
	}
	v[len(v)-1] = bxb + 2*cross + ee
}

// watched is one coefficient of one alternative in the simulation.
type watched struct {
	alternative int
	name        string
	weights     []float64
	truth       []float64 // by truth
	estimates   [][]float64
	covered     [][]bool
}

// simulate draws samples from each truth at the user's design and learns every alternative on each, tuning and choice included. The errors are
// independent and normal with the residual variance of the model left alone.
//
// Cost: a resample's for every sample, whatever the number of rows.
func (c *Comparison) simulate(ctx context.Context, red *reduction.Reduction, choices []choice, opt Options) error {
	p := red.P
	c.Simulation.Count = c.Study.simulations(p)
	if c.Simulation.Count <= 0 {
		c.Simulation = Simulation{Reason: "the study asks for no simulated samples"}
		return nil
	}
	switch {
	case c.AsIs.NotIdentified != nil:
		c.Simulation = Simulation{Reason: "with an exact dependency there is no estimate of the model left alone to take for the truth"}
		return nil
	case math.IsNaN(c.S) || c.S == 0:
		c.Simulation = Simulation{Reason: "there is no residual variance to draw errors with"}
		return nil
	case !linear.EnoughForLight(c.Problem.Sample, resamplesLight):
		c.Simulation = Simulation{Reason: "the regressors are too close to an exact dependency to draw samples from their cross-products in float64"}
		return nil
	}
	source := c.rowSource(red)
	sums := source.weighted([][]float64{source.ones()})[0].sums
	truths := c.truths()
	c.Simulation.Truths, c.Simulation.Folds = truths, source.folds
	sim := c.newSimulator(source.light, sums, truths)
	watch := c.watch(truths)
	n := c.Simulation.Count
	for _, w := range watch {
		for range truths {
			w.estimates = append(w.estimates, make([]float64, n))
			w.covered = append(w.covered, make([]bool, n))
		}
	}
	quantiles := newQuantiles()
	var mu sync.Mutex
	done := 0
	err := each(ctx, n, opt.Workers, func(d int) {
		for t, folds := range sim.draw(c.Study.Seed, d, truths) {
			if ctx.Err() != nil {
				return
			}
			tr := (&parts{units: source.light, sums: folds, window: source.window}).whole()
			tr.Covariance = true
			c.learnSimulated(tr, choices, watch, t, d, quantiles)
		}
		if opt.Progress != nil {
			mu.Lock()
			done++
			opt.Progress("samples simulated", done, n)
			mu.Unlock()
		}
	})
	if err != nil {
		return err
	}
	for _, w := range watch {
		a := c.Alternatives[w.alternative]
		for t, truth := range truths {
			s := sumUp(truth.Name, w.name, w.truth[t], w.estimates[t], w.covered[t])
			if a.Fitted.Factor == nil { // no interval, no coverage
				s.Coverage, s.CoverageError = math.NaN(), math.NaN()
			}
			a.Simulated = append(a.Simulated, s)
		}
	}
	return nil
}

// watch lists the focal coefficients, and the effects of focal variables, of every alternative.
func (c *Comparison) watch(truths []Truth) []*watched {
	sample := c.Problem.Sample
	var focal []string
	for _, j := range c.Focal {
		focal = append(focal, c.Problem.Names[j])
	}
	var effects []string
	for _, e := range c.effects() {
		effects = append(effects, e.name)
	}
	var out []*watched
	for i, a := range c.Alternatives {
		if a.own != nil { // another question, about rows that the truths do not speak of
			continue
		}
		put := func(list []Coefficient, names []string) {
			for _, k := range list {
				if !slices.Contains(names, k.Name) || k.weights == nil {
					continue
				}
				w := &watched{alternative: i, name: k.Name, weights: k.weights}
				for _, t := range truths {
					value := t.slopes
					if sample.Constant {
						value = append([]float64{sample.ConstantFor(t.slopes)}, t.slopes...)
					}
					w.truth = append(w.truth, dot(k.weights, value))
				}
				out = append(out, w)
			}
		}
		put(a.Derived, effects)
		put(a.Coefficients, focal)
	}
	return out
}

// learnSimulated learns every alternative on one sample and notes estimates and whether the nominal interval holds the truth.
func (c *Comparison) learnSimulated(t remedy.Training, choices []choice, watch []*watched, truth, d int, quantiles *quantileTable) {
	sample := t.Sample
	k := 0
	if sample.Constant {
		k = 1
	}
	s0, df0 := 0.0, float64(sample.N-c.AsIs.Rank-k)
	value := make([]float64, k+sample.P)
	next := 0
	for i, ch := range choices {
		if next == len(watch) {
			return
		}
		if i > 0 && watch[next].alternative != i {
			continue
		}
		fit := ch.variant.Learn(t)
		rss := sample.RSS(fit.Slopes)
		if i == 0 {
			s0 = math.Sqrt(rss / df0)
		}
		s, df := s0, df0
		if ch.variant.OwnVariance {
			df = float64(sample.N - fit.Columns - k)
			s = math.Sqrt(rss / df)
		}
		if k == 1 {
			value[0] = sample.ConstantFor(fit.Slopes)
		}
		copy(value[k:], fit.Slopes)
		half := quantiles.of(df) * s
		for ; next < len(watch) && watch[next].alternative == i; next++ {
			w := watch[next]
			est := dot(w.weights, value)
			w.estimates[truth][d] = est
			w.covered[truth][d] = fit.Factor != nil && math.Abs(est-w.truth[truth]) <= half*math.Sqrt(math.Max(0, form(w.weights, fit.Factor)))
		}
	}
}

// quantileTable keeps the t quantiles already computed.
type quantileTable struct {
	mu sync.Mutex
	by map[float64]float64
}

func newQuantiles() *quantileTable { return &quantileTable{by: map[float64]float64{}} }

func (q *quantileTable) of(df float64) float64 {
	q.mu.Lock()
	defer q.mu.Unlock()
	v, ok := q.by[df]
	if !ok {
		v = tail.TQuantile(0.95, df)
		q.by[df] = v
	}
	return v
}

func sumUp(truth, name string, value float64, estimates []float64, covered []bool) Simulated {
	n := float64(len(estimates))
	s := Simulated{Truth: truth, Coefficient: name, True: value}
	mean := 0.0
	held, wrong := 0, 0
	for i, e := range estimates {
		mean += e / n
		if covered[i] {
			held++
		}
		if e*value < 0 {
			wrong++
		}
	}
	s.Coverage, s.WrongSign = float64(held)/n, float64(wrong)/n
	var m2, m4, e2, e4 float64
	for _, e := range estimates {
		d := e - mean
		m2 += d * d / n
		m4 += d * d * d * d / n
		d = e - value
		e2 += d * d / n
		e4 += d * d * d * d / n
	}
	s.Bias, s.SD, s.RMSE = mean-value, math.Sqrt(m2*n/math.Max(1, n-1)), math.Sqrt(e2)
	s.BiasError = s.SD / math.Sqrt(n)
	if m2 > 0 {
		s.SDError = math.Sqrt(math.Max(0, m4-m2*m2)/n) / (2 * math.Sqrt(m2))
	}
	if e2 > 0 {
		s.RMSEError = math.Sqrt(math.Max(0, e4-e2*e2)/n) / (2 * s.RMSE)
	}
	share := func(p float64) float64 { return math.Sqrt(p * (1 - p) / n) }
	s.CoverageError, s.WrongSignError = share(s.Coverage), share(s.WrongSign)
	if value == 0 {
		s.WrongSign, s.WrongSignError = math.NaN(), math.NaN()
	}
	return s
}

// Sentence says how the samples were drawn.
func (s Simulation) Sentence() string {
	if s.Count == 0 {
		return "Nothing was simulated: " + s.Reason + "."
	}
	return fmt.Sprintf("%d samples for each truth, drawn at the regressors as they are, with independent normal errors of the residual variance; every alternative is learned anew in each, "+
		"tuning and choice included (%d-fold cross-validation). Coverage is that of the classical 95 %% interval given the tuning.", s.Count, s.Folds)
}
