package compare_test

import (
	"context"
	"math"
	"strings"
	"testing"

	"modelmend/compare"
)

// TestCostOfChoosing: 23 rows of two regressors whose correlation is exactly 0.9, so that 20 degrees of freedom are left. Critical values: the table of
// noncentral F points computed outside this project and compared with Wallace and Toro (1969) and Goodnight and Wallace (1972), row 20: 4.3512 central,
// 8.0368 for the strong criterion. Worst coverage after dropping for |t| < 1.96 at this correlation: 38.4 %, computed outside as well.
func TestCostOfChoosing(t *testing.T) {
	const n, r = 23, 0.9
	var cells [][]float64
	for i := range n {
		a := 2 * math.Pi * float64(i) / n
		u, v := math.Cos(a), math.Sin(a) // centred, orthogonal, of one length
		cells = append(cells, []float64{u + math.Cos(3*a) + 0.7*math.Sin(5*a) + 0.4*v, u, r*u + math.Sqrt(1-r*r)*v})
	}
	s := newStudy("y = x1 + x2")
	s.Focal, s.Cutoffs.VIF = []string{"x1"}, 4
	c, err := compare.Run(context.Background(), numbers(t, []string{"y", "x1", "x2"}, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	seen := false
	for _, a := range c.Alternatives {
		if a.Key != "drop:x2" {
			continue
		}
		seen = true
		critical := map[string]float64{"restriction": 4.3512, "strong-mse": 8.0368}
		single := 0.0
		for _, test := range a.Description.Tests {
			if test.Name == "single-t" {
				single = test.Statistic
				continue
			}
			if math.Abs(test.Critical-critical[test.Name]) > 5e-5 || critical[test.Name] == 0 {
				t.Errorf("%s: critical value %.5f, want %.4f", test.Name, test.Critical, critical[test.Name])
			}
			delete(critical, test.Name)
		}
		if len(critical) > 0 {
			t.Errorf("missing tests %v", critical)
		}
		if f := a.Description.Tests[0].Statistic; math.Abs(f-single*single) > 1e-9*f {
			t.Errorf("F is %g, the square of t %g", f, single*single)
		}
		w := a.Description.Worst
		if len(w) != 1 || w[0].Coefficient != "x1" || math.Abs(w[0].Coverage-0.384) > 5e-4 || math.Abs(math.Abs(w[0].Correlation)-r) > 1e-9 {
			t.Errorf("worst coverage %+v, want 38.4 %%", w)
		}
		// Break-even by hand: dropping x2 takes s^2/S (1/(1-r^2) - 1) off the variance of x1, S the sum of squares n/2; in terms of x2's true
		// coefficient it is one standard error, s/sqrt(S (1-r^2)).
		bias, effect := c.S*math.Sqrt((1/(1-r*r)-1)/(n/2.0)), c.S/math.Sqrt(n/2.0*(1-r*r))
		b := a.Description.BreakEven
		if len(b) != 1 || math.Abs(b[0].Bias-bias) > 1e-9*bias || math.Abs(b[0].Effect-effect) > 1e-9*effect || !strings.Contains(b[0].Text, "x2") {
			t.Errorf("break-even %+v, want bias %g, effect %g", b, bias, effect)
		}
	}
	if !seen {
		t.Fatalf("no drop:x2: %v", c.NotApplicable)
	}
}
