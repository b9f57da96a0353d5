package view

import (
	"bytes"
	"encoding/json"
	"reflect"
	"strings"
)

// enumerations lists the allowed values of text fields, by Go type and field.
var enumerations = map[string][]string{
	"Results.Format":                {Format},
	"Results.Purpose":               {"explain", "predict", "describe"},
	"Folds.Kind":                    {"", "random", "leave-one-out", "clusters", "blocks", "rolling", "column"},
	"Resampling.Drawn":              {"", "rows", "groups of rows", "clusters", "blocks of periods"},
	"Reason.Kind":                   {"substantive", "structural", "location", "exact"},
	"NearDependency.Kind":           {"substantive", "structural", "location", "exact"},
	"Regressor.Kind":                {"number", "function", "power", "product", "ratio", "dummy"},
	"Coefficient.Status":            {"estimated", "implied", "zero", "different quantity", "not identified"},
	"Alternative.StandardErrorKind": {"classical", "robust", "clustered", "autocorrelation"},
	"StandardError.Kind":            {"classical", "robust", "clustered", "autocorrelation"},
	"ErrorKind.Kind":                {"classical", "robust", "clustered", "autocorrelation"},
	"LedgerOther.Kind":              {"robust", "clustered", "autocorrelation"},
	"ErrorApart.Kind":               {"clusters", "blocks", "rolling"},
	"Difference.Scale":              {"mse"},
	"Tuning.Parameter":              {"penalty", "components"},
	"Tuning.Rule":                   {"cross-validation", "fixed by the user"},
	"RuleValue.Rule":                {"leave-one-out", "generalized-cross-validation", "hoerl-kennard-baldwin", "lawless-wang", "one-standard-error"},
	"Test.Name":                     {"restriction", "single-t", "strong-mse", "weak-mse"},
	"Truth.Name":                    {"as-estimated", "focal-zero", "focal-smallest", "halfway"},
	"Simulation.Truth":              {"as-estimated", "focal-zero", "focal-smallest", "halfway"},
	"Advice.Purpose":                {"explain", "predict", "describe"},
}

// descriptions explain fields whose unit, sign or scale could be mistaken.
var descriptions = map[string]string{
	"Results.Version":                    "version of this contract",
	"Run.DataHash":                       "SHA-256 of the bytes read",
	"Run.Study":                          "the effective study as YAML; running it again gives the same bytes",
	"Folds.Assignment":                   "0-based fold in which each used row is held out, -1 for never, in file order, one list a repeat",
	"Regressor.VIFCentered":              "with the variables of powers and products centred: the substantive part",
	"Regressor.StructuralShare":          "1 - ln(vifCentered)/ln(vif)",
	"Regressor.SD":                       "divisor n-1",
	"Term.GeneralizedVIF":                "the determinant ratio; entanglement with other terms only",
	"Term.PerDegree":                     "generalizedVIF^(1/degrees), on the scale of vif",
	"VarianceShares.Shares":              "one row a coefficient; each row sums to 1",
	"NearDependency.R2":                  "of the left side on the members",
	"LedgerEntry.StandardErrorUntangled": "standardError / root of vif: estimate, residualSD and ownSD held fixed",
	"LedgerOther.Factor":                 "root of [sum xt^2 e^2 / (sum xt^2)^2] / [sum xc^2 e^2 / (sum xc^2)^2] for robust errors: xt the regressor net of the others, xc about its mean, the same residuals",
	"Coefficient.EstimatedBias":          "estimate minus the as-is estimate: the plug-in estimate of the bias",
	"Coefficient.EstimatedMSE":           "variance + max(0, bias^2 - variance of the bias estimate), with the as-is residual variance",
	"Coefficient.Low":                    "95 % limit: estimate - t * standardError; given the tuning where one was chosen",
	"OutOfSample.RMSE":                   "root of the squared errors pooled over all held-out predictions of all repeats",
	"OutOfSample.R2":                     "1 - pooled squared error / pooled squared deviation from each training mean",
	"FoldError.MSE":                      "null in all folds where one has fewer than ten rows, unless the study shows small cells",
	"Simulation.Bias":                    "mean estimate less the true value",
	"Simulation.Coverage":                "share of the samples whose nominal 95 % interval, given the tuning and with classical errors, holds the true value",
	"Simulation.WrongSign":               "share of the samples whose estimate has the other sign; null where the true value is zero",
	"Resampled.StandardError":            "standard deviation over resamples of the whole procedure, tuning chosen again in each; copies of a row stay in its fold",
	"Resampled.Low":                      "2.5 % point of the resampled values",
	"Resampled.BiasCorrected":            "bias-corrected and accelerated interval (Efron 1987)",
	"Resampled.ShareZero":                "share of the resamples in which the coefficient was set to zero; one less this is how often it was kept",
	"Resampled.Used":                     "resamples in which the coefficient had a value of its own",
	"Difference.Estimate":                "mean over splits of the difference in mean squared error, alternative minus as-is: negative is better",
	"Tuning.Penalty":                     "on the correlation form: (R + penalty I)^-1 r for ridge; of an elastic net, with regressors and dependent variable of unit length, |y - Zb|^2/2 + penalty (mix sum|b| + (1-mix)/2 sum b^2)",
	"Tuning.PenaltyTimes":                "penalty * (n-1), sd with divisor n-1; null where the penalty is not on squares alone",
	"Tuning.EffectiveDegrees":            "null where no formula gives them, as between no and all components of partial least squares",
	"PathPoint.Error":                    "cross-validated mean squared error at this value, not nested",
	"PathPoint.ErrorSD":                  "its standard error over the splits",
}

// Schema returns the JSON Schema (draft 2020-12) of results.json, derived from the types themselves.
func Schema() []byte {
	g := schemaMaker{defs: map[string]any{}}
	root := g.object(reflect.TypeFor[Results]())
	root["$schema"] = "https://json-schema.org/draft/2020-12/schema"
	root["title"] = "modelmend results, version 1"
	root["$defs"] = g.defs
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", "  ")
	if err := enc.Encode(root); err != nil {
		panic("schema cannot be written: " + err.Error())
	}
	return b.Bytes()
}

type schemaMaker struct{ defs map[string]any }

func (g schemaMaker) object(t reflect.Type) map[string]any {
	properties := map[string]any{}
	required := []string{}
	for i := range t.NumField() {
		f := t.Field(i)
		name, options, _ := strings.Cut(f.Tag.Get("json"), ",")
		s := g.value(f.Type)
		where := t.Name() + "." + f.Name
		if values, ok := enumerations[where]; ok {
			s["enum"] = values
		}
		if text, ok := descriptions[where]; ok {
			if _, ref := s["$ref"]; ref {
				s = map[string]any{"allOf": []any{s}}
			}
			s["description"] = text
		}
		properties[name] = s
		if options != "omitempty" {
			required = append(required, name)
		}
	}
	return map[string]any{"type": "object", "properties": properties, "required": required, "additionalProperties": false}
}

func (g schemaMaker) value(t reflect.Type) map[string]any {
	if t == reflect.TypeFor[Num]() {
		return map[string]any{"type": []string{"number", "null"}}
	}
	switch t.Kind() {
	case reflect.String:
		return map[string]any{"type": "string"}
	case reflect.Bool:
		return map[string]any{"type": "boolean"}
	case reflect.Int, reflect.Int64:
		return map[string]any{"type": "integer"}
	case reflect.Slice:
		return map[string]any{"type": "array", "items": g.value(t.Elem())}
	case reflect.Pointer:
		return map[string]any{"anyOf": []any{g.value(t.Elem()), map[string]any{"type": "null"}}}
	case reflect.Struct:
		if _, ok := g.defs[t.Name()]; !ok {
			g.defs[t.Name()] = nil // placed before its fields, which may refer to it
			g.defs[t.Name()] = g.object(t)
		}
		return map[string]any{"$ref": "#/$defs/" + t.Name()}
	}
	panic("schema: no rule for " + t.String())
}
