package view

import "testing"

// TestTruthSentence: the answer names what comes closest, an interval that covers too little, and the drop that the data decide.
func TestTruthSentence(t *testing.T) {
	one := func(label, remedy, status string, rmse, coverage, e Num) Alternative {
		return Alternative{Label: label, Remedy: remedy, Coefficients: []Coefficient{{Name: "x", Status: status}},
			Simulation: []Simulation{{Truth: "as-estimated", Coefficient: "x", SD: 1, RMSE: rmse, RMSEError: 0.01, Coverage: coverage, CoverageError: e}, {Truth: "halfway", Coefficient: "x", SD: 1, RMSE: 0.01}}}
	}
	alone := one("Leave it alone", "as-is", "estimated", 1, 0.95, 0.01)
	for _, c := range []struct {
		name string
		list []Alternative
		want string
	}{
		{"the drop that the data decide", []Alternative{alone, one("Drop z", "drop", "estimated", 0.5, 0.6, 0.01), one("Drop if |t| < 1.96", "drop-by-rule", "estimated", 0.8, 0.755, 0.01), one("Centre", "center", "different quantity", 0.1, 0.1, 0.01)},
			"If the truth is what was estimated, Drop z comes closest to the coefficient of x, with a root mean squared error of 0.5 against 1 for the model left alone, but its 95 % interval holds the truth in only 60 % of the samples. " +
				"Of 3 nominal 95 % intervals 2 hold it in clearly under 90 % of the samples, among them the drop that the data decide (Drop if |t| < 1.96: 76 %)."},
		{"none closer beyond chance", []Alternative{alone, one("Ridge", "ridge", "estimated", 0.98, 0.88, 0.02)},
			"If the truth is what was estimated, no alternative comes clearly closer to the coefficient of x than the model left alone, whose root mean squared error is 1. No nominal 95 % interval holds it in clearly under 90 % of the samples."},
		{"another is worst", []Alternative{alone, one("Drop z", "drop", "estimated", 2, 0, 0)},
			"If the truth is what was estimated, no alternative comes clearly closer to the coefficient of x than the model left alone, whose root mean squared error is 1. Of 2 nominal 95 % intervals 1 holds it in clearly under 90 % of the samples, least often that of Drop z (0 %)."},
		{"the closest never covers", []Alternative{alone, one("Drop z", "drop", "estimated", 0.5, 0, 0)},
			"If the truth is what was estimated, Drop z comes closest to the coefficient of x, with a root mean squared error of 0.5 against 1 for the model left alone, but its 95 % interval holds the truth in none of the samples. " +
				"Of 2 nominal 95 % intervals 1 holds it in clearly under 90 % of the samples, least often that of Drop z (0 %)."},
		{"nothing simulated", []Alternative{{}}, ""},
	} {
		if got := truthSentence(&Results{Simulations: Simulations{Count: 99}, Alternatives: c.list}); got != c.want {
			t.Errorf("%s:\ngot  %s\nwant %s", c.name, got, c.want)
		}
	}
}
