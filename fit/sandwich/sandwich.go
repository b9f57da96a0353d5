// Package sandwich gives standard errors that do not take errors for independent and of equal variance.
//
// Rows go in one after another: regressors x (q values, the constant's 1 first where there is one), a residual e and what tells rows apart (leverage,
// cluster, order). Out comes the middle M of the covariance B M B' of any linear estimator B X'y. For digits, rows should stand about their means and
// in units of their standard deviations, and B with them. It refuses a leverage of one where that would divide by zero. It stands after linear and
// before remedy.
package sandwich

import "math"

// Kind names how the middle is formed.
type Kind string

// The kinds. HC0 to HC3: MacKinnon and White (1985), Journal of Econometrics 29(3), 305-325; HC4: Cribari-Neto (2004), Computational Statistics & Data
// Analysis 45(2), 215-233.
const (
	HC0             Kind = "HC0"
	HC1             Kind = "HC1"
	HC2             Kind = "HC2"
	HC3             Kind = "HC3"
	HC4             Kind = "HC4"
	Clustered       Kind = "clustered"
	Autocorrelation Kind = "autocorrelation"
)

// Middle is a symmetric q x q matrix, its upper triangle packed by rows: the sum of w x x'.
type Middle struct {
	Q      int
	packed []float64
}

// NewMiddle is zero.
func NewMiddle(q int) *Middle { return &Middle{q, make([]float64, q*(q+1)/2)} }

// Add adds w x x'. Cost O(q^2).
func (m *Middle) Add(x []float64, w float64) {
	k := 0
	for i, v := range x {
		a := w * v
		row := m.packed[k : k+m.Q-i]
		for j, u := range x[i:] {
			row[j] += a * u
		}
		k += m.Q - i
	}
}

// AddScaled adds f times another middle.
func (m *Middle) AddScaled(o *Middle, f float64) {
	for i, v := range o.packed {
		m.packed[i] += f * v
	}
}

// Between returns B M B' for a q x q matrix B (row-major), row-major. Cost O(q^3).
func (m *Middle) Between(b []float64) []float64 {
	q := m.Q
	full := make([]float64, q*q)
	k := 0
	for i := range q {
		for j := i; j < q; j++ {
			full[i*q+j], full[j*q+i] = m.packed[k], m.packed[k]
			k++
		}
	}
	bm := make([]float64, q*q)
	for i := range q {
		for l, w := range b[i*q : i*q+q] {
			if w == 0 {
				continue
			}
			row := full[l*q : l*q+q]
			out := bm[i*q : i*q+q]
			for j, v := range row {
				out[j] += w * v
			}
		}
	}
	out := make([]float64, q*q)
	for i := range q {
		for j := i; j < q; j++ {
			v := 0.0
			for l, w := range b[j*q : j*q+q] {
				v += bm[i*q+l] * w
			}
			out[i*q+j], out[j*q+i] = v, v
		}
	}
	return out
}

// Weight is what the squared residual of a row is multiplied by, with n rows, k coefficients fitted and h the row's leverage:
//
//	HC0 1,  HC1 n/(n-k),  HC2 1/(1-h),  HC3 1/(1-h)^2,  HC4 (1-h)^-min(4, n h/k).
//
// ok is false where h leaves nothing to divide by.
func Weight(kind Kind, n, k int, h float64) (w float64, ok bool) {
	left := 1 - h
	if kind != HC0 && kind != HC1 && left < 1e-10 {
		return 0, false
	}
	switch kind {
	case HC1:
		return float64(n) / float64(n-k), true
	case HC2:
		return 1 / left, true
	case HC3:
		return 1 / (left * left), true
	case HC4:
		return math.Pow(left, -math.Min(4, float64(n)*h/float64(k))), true
	}
	return 1, true
}

// Clusters sums x e within each cluster.
type Clusters struct {
	q    int
	sums []float64
	seen []bool
}

// NewClusters makes room for so many clusters. Memory q numbers a cluster.
func NewClusters(q, clusters int) *Clusters {
	return &Clusters{q: q, sums: make([]float64, q*clusters), seen: make([]bool, clusters)}
}

// Add adds a row to its cluster, counted from 0.
func (c *Clusters) Add(cluster int32, x []float64, e float64) {
	c.seen[cluster] = true
	s := c.sums[int(cluster)*c.q : (int(cluster)+1)*c.q]
	for j, v := range x {
		s[j] += v * e
	}
}

// Middle returns the sum over clusters of (sum x e)(sum x e)' times G/(G-1) (n-1)/(n-k), with G the clusters that hold rows, and G.
//
// Source: Liang and Zeger (1986), Biometrika 73(1), 13-22; the factor is that of Petersen (2009), Review of Financial Studies 22(1), 435-480.
func (c *Clusters) Middle(n, k int) (m *Middle, clusters int) {
	m = NewMiddle(c.q)
	for g, seen := range c.seen {
		if seen {
			m.Add(c.sums[g*c.q:(g+1)*c.q], 1)
			clusters++
		}
	}
	g := float64(clusters)
	f := g / (g - 1) * float64(n-1) / float64(n-k)
	for i := range m.packed {
		m.packed[i] *= f
	}
	return m, clusters
}

// TwoWay returns A + B - AB, the middles of the first and second grouping less that of their intersections, each with its own factor. The result
// need not be positive: a variance formed with it can come out negative, and is to be reported as such.
//
// Source: Cameron, Gelbach and Miller (2011), Journal of Business & Economic Statistics 29(2), 238-249.
func TwoWay(a, b, both *Middle) *Middle {
	out := NewMiddle(a.Q)
	out.AddScaled(a, 1)
	out.AddScaled(b, 1)
	out.AddScaled(both, -1)
	return out
}

// Lags is the number of lags of the published rule, floor(4 (n/100)^(2/9)).
//
// Source: Newey and West (1994), Review of Economic Studies 61(4), 631-653, as commonly shortened.
func Lags(n int) int { return int(4 * math.Pow(float64(n)/100, 2.0/9)) }

// Series forms the middle of rows that come in time order,
//
//	G_0 + sum over l = 1..lags of (1 - l/(lags+1)) (G_l + G_l'),  G_l = sum over t of (x_t e_t)(x_{t-l} e_{t-l})'.
//
// Source: Newey and West (1987), Econometrica 55(3), 703-708.
type Series struct {
	q, lags int
	past    [][]float64 // the last scores, newest first
	sum     *Middle
	lagged  []float64 // q x q: weighted sums of products with the past
}

// NewSeries starts before the first row.
func NewSeries(q, lags int) *Series {
	return &Series{q: q, lags: lags, sum: NewMiddle(q), lagged: make([]float64, q*q)}
}

// Add takes the next row in time. Cost O(q^2 lags).
func (s *Series) Add(x []float64, e float64) {
	u := make([]float64, s.q)
	for j, v := range x {
		u[j] = v * e
	}
	s.sum.Add(u, 1)
	for l, p := range s.past {
		w := 1 - float64(l+1)/float64(s.lags+1)
		for i, a := range u {
			row := s.lagged[i*s.q : (i+1)*s.q]
			for j, b := range p {
				row[j] += w * a * b
			}
		}
	}
	if s.lags > 0 {
		if len(s.past) == s.lags {
			s.past = s.past[:s.lags-1]
		}
		s.past = append([][]float64{u}, s.past...)
	}
}

// Middle returns the middle of the rows so far.
func (s *Series) Middle() *Middle {
	out := NewMiddle(s.q)
	out.AddScaled(s.sum, 1)
	k := 0
	for i := range s.q {
		for j := i; j < s.q; j++ {
			out.packed[k] += s.lagged[i*s.q+j] + s.lagged[j*s.q+i]
			k++
		}
	}
	return out
}

// Diagonal returns the diagonal of the middle.
func (m *Middle) Diagonal() []float64 {
	out := make([]float64, m.Q)
	k := 0
	for i := range out {
		out[i] = m.packed[k]
		k += m.Q - i
	}
	return out
}
