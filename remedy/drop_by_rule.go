package remedy

import (
	"fmt"
	"math"

	"modelmend/fit/linear"
)

// ruleMark is the t-ratio that the rule asks for, the usual 5 % point of the normal distribution.
const ruleMark = 1.96

// drop-by-rule does what is often done by hand: look at the t-ratios, and drop what is not significant. It is a remedy of its own so that the price
// of looking can be seen: the choice is made again inside every fold, resample and simulated sample.
var _ = register(Remedy{
	Key:   "drop-by-rule",
	Title: "Drop what is not significant",
	Order: 15,
	Does: "Looks at the t-ratios of the tangled regressors that are neither of interest nor to be kept, and drops the one with the smallest |t| if it " +
		"is below 1.96; otherwise keeps them all. The look is repeated on the training rows of every fold, resample and simulated sample.",
	Assumes: "A coefficient that is not significant is zero. It need not be: tangled coefficients are not significant because they are tangled.",
	Buys:    "What dropping buys, without having to say beforehand which regressor.",
	Costs: "The interval shown is that of the fit finally chosen and takes the choice as given, as it is usually reported. It covers less often than it " +
		"claims, far less where regressors are strongly tangled; the resampled interval and the simulation show by how much.",
	Means: "A kept coefficient is a partial association in some samples and a total one in others.",
	Referee: "Was the regressor dropped after seeing its t-ratio? What would the interval be if that choice were counted? " +
		"What are the estimates of the long equation?",
	Sources: []string{
		"Leeb and Pötscher (2005), Econometric Theory 21(1), 21-59",
		"Giles and Giles (1993), Journal of Economic Surveys 7(2), 145-197",
		"Danilov and Magnus (2004), Journal of Econometrics 122(1), 27-46",
	},
	Variants: ruleVariants,
})

func ruleVariants(p *Problem) ([]Variant, []NotApplicable) {
	drops, _ := dropVariants(p)
	var rule ruleFit
	for _, v := range drops {
		if len(v.Removes) == 1 { // a t-ratio speaks of one coefficient
			rule.columns = append(rule.columns, v.Removes[0])
			rule.drops = append(rule.drops, v)
		}
	}
	if len(rule.columns) == 0 {
		return nil, []NotApplicable{{"drop-by-rule", "no single tangled regressor may be dropped"}}
	}
	rule.p = p
	list := "the tangled regressor with the smallest |t|, among " + join(p.names(rule.columns)) + ","
	if len(rule.columns) == 1 {
		list = p.Names[rule.columns[0]]
	}
	out := []Variant{rule.variant("drop-by-rule", "Drop if |t| < 1.96", list)}
	if i := rule.closest(); i >= 0 && len(rule.columns) > 1 {
		name := p.Names[rule.columns[i]]
		one := ruleFit{p: p, columns: rule.columns[i : i+1], drops: rule.drops[i : i+1]}
		out = append(out, one.variant("drop-by-rule:"+name, "Drop "+name+" if |t| < 1.96", name))
	}
	return out, nil
}

func (r ruleFit) variant(key, label, what string) Variant {
	return Variant{Key: key, Label: label, OwnVariance: true,
		Summary: "Least squares without " + what + " if |t| is below 1.96; with every regressor otherwise.",
		Learn:   r.learn, Describe: r.describe}
}

// closest returns the candidate whose estimate moves most with that of a coefficient of interest, or -1: the one that a pre-test would be about.
func (r ruleFit) closest() int {
	s := r.p.Sample
	fit := s.LeastSquares(true)
	if fit.NotIdentified != nil {
		return -1
	}
	best, most := -1, 0.0
	for i, j := range r.columns {
		for k, focal := range r.p.Focal {
			if !focal || k == j {
				continue
			}
			if c := math.Abs(fit.Inverse[j*s.P+k]) / math.Sqrt(fit.Inverse[j*s.P+j]*fit.Inverse[k*s.P+k]); c > most {
				best, most = i, c
			}
		}
	}
	return best
}

type ruleFit struct {
	p       *Problem
	columns []int
	drops   []Variant
}

// chosen returns the place of the regressor to drop, or -1, with its t-ratio.
func (r ruleFit) chosen(s *linear.Sample) (int, float64) {
	fit := s.LeastSquares(true)
	df := float64(s.N - fit.Rank)
	if s.Constant {
		df--
	}
	if fit.NotIdentified != nil || df <= 0 {
		return -1, math.NaN()
	}
	sd := math.Sqrt(fit.RSS / df)
	best, least := -1, ruleMark
	t := math.NaN()
	for i, j := range r.columns {
		v := fit.Slopes[j] / (sd * math.Sqrt(fit.Inverse[j*s.P+j]))
		if math.Abs(v) < least {
			best, least, t = i, math.Abs(v), v
		}
	}
	return best, t
}

func (r ruleFit) learn(t Training) *Fitted {
	if i, _ := r.chosen(t.Sample); i >= 0 {
		return r.drops[i].Learn(t)
	}
	return learnAsIs(t)
}

func (r ruleFit) describe(f *Final) Description {
	i, t := r.chosen(f.Problem.Sample)
	var d Description
	if i >= 0 {
		d = r.drops[i].Describe(f)
		name := f.Problem.Names[r.columns[i]]
		d.Notes = append(d.Notes, Note{"rule-dropped", fmt.Sprintf("on all rows the rule drops %s (t-ratio %s)", name, say(t))})
		d.Costs = d.Costs[:len(d.Costs)-1] // the caution of a plain drop, which was announced beforehand
	} else {
		d = describeAsIs(f)
		d.Notes = append(d.Notes, Note{"rule-kept", "on all rows every candidate has |t| of 1.96 or more: the rule keeps them all, but it was asked"})
	}
	d.Costs = append(d.Costs, "the standard errors take the choice as given, though it was made by looking at the same data: read the resampled ones")
	return d
}
