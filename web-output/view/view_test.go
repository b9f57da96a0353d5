package view_test

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/dataset"
	"modelmend/web-output/view"
)

// schemaOf compiles the published schema with an independent implementation of JSON Schema (santhosh-tekuri/jsonschema).
func schemaOf(t *testing.T) *jsonschema.Schema {
	t.Helper()
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(view.Schema()))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("results.schema.json", doc); err != nil {
		t.Fatal(err)
	}
	s, err := c.Compile("results.schema.json")
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func validate(t *testing.T, s *jsonschema.Schema, r *view.Results) map[string]any {
	t.Helper()
	b, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(b))
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Validate(doc); err != nil {
		t.Errorf("the results break the schema: %v", err)
	}
	return doc.(map[string]any)
}

func table(t *testing.T) *dataset.Table {
	t.Helper()
	var b strings.Builder
	b.WriteString("y,a,b,c,group\n")
	state := uint64(11)
	next := func() float64 {
		state = state*6364136223846793005 + 1442695040888963407
		return float64(state>>40) / float64(1<<24)
	}
	for i := range 64 {
		a := next()
		w := a + 0.1*next()
		cells := []string{num(2*a - w + next()), num(a), num(w), num(next()), []string{"p", "q"}[i%2]}
		if i == 7 {
			cells[1] = "NA"
		}
		b.WriteString(strings.Join(cells, ",") + "\n")
	}
	tb, err := dataset.Read(strings.NewReader(b.String()), "table.csv")
	if err != nil {
		t.Fatal(err)
	}
	return tb
}

func num(v float64) string {
	b, _ := json.Marshal(math.Round(v*1e4) / 1e4)
	return string(b)
}

func study(eq string) *compare.Study {
	return &compare.Study{Data: "table.csv", Equation: eq, Purpose: compare.Explain, Seed: 1, Cutoffs: collinear.DefaultCutoffs()}
}

// TestResultsKeepTheContract validates whole runs against the schema: an ordinary one, one with every number missing that can be
// missing, a diagnosis alone.
func TestResultsKeepTheContract(t *testing.T) {
	s := schemaOf(t)
	run := func(eq string, edit func(*compare.Study)) *view.Results {
		st := study(eq)
		if edit != nil {
			edit(st)
		}
		c, err := compare.Run(context.Background(), table(t), st, compare.Options{})
		if err != nil {
			t.Fatal(err)
		}
		return view.Build(c, "data: table.csv\n", "test")
	}
	doc := validate(t, s, run("y = a + b + c + group", nil))
	if doc["format"] != "modelmend-results" {
		t.Errorf("format %v", doc["format"])
	}
	validate(t, s, run("y = a + b + a^2 + a*c + c + group", func(st *compare.Study) { st.Focal = []string{"a"} }))
	validate(t, s, run("y = a + b + (a+b)", nil)) // exactly dependent
	validate(t, s, run("y = a + b + c", func(st *compare.Study) { st.NoConstant = true }))
	validate(t, s, run("y = c", nil))
	c, err := compare.Check(context.Background(), table(t), study("y = a + b"), compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	validate(t, s, view.Build(c, "", "test"))
}

// TestSmallPartsAreWithheld: an error that rests on fewer than ten rows (on one, where each row is held out in turn) is not told, unless the
// study asks for it; the pooled error stays.
func TestSmallPartsAreWithheld(t *testing.T) {
	s := schemaOf(t)
	for _, c := range []struct {
		name  string
		folds compare.FoldSpec
		show  bool
		told  bool
	}{
		{"each row in turn", compare.FoldSpec{Kind: "leave-one-out"}, false, false},
		{"ten parts of 63 rows", compare.FoldSpec{}, false, false},
		{"six parts of 63 rows", compare.FoldSpec{Kind: "random", Count: 6}, false, true},
		{"seven parts of 63 rows", compare.FoldSpec{Kind: "random", Count: 7}, false, false},
		{"each row in turn, asked for", compare.FoldSpec{Kind: "leave-one-out"}, true, true},
	} {
		st := study("y = a + b + c")
		st.Folds, st.ShowSmallCells = c.folds, c.show
		run, err := compare.Run(context.Background(), table(t), st, compare.Options{})
		if err != nil {
			t.Fatal(err)
		}
		r := view.Build(run, "", "test")
		validate(t, s, r)
		for _, a := range r.Alternatives {
			o := a.OutOfSample
			if (o.Reason == "") != c.told || o.RMSE.IsNone() {
				t.Errorf("%s, %s: reason %q, pooled error %v", c.name, a.Key, o.Reason, o.RMSE)
			}
			for _, f := range o.Folds {
				if f.MSE.IsNone() == c.told {
					t.Fatalf("%s, %s: the error of a part of %d rows is %v", c.name, a.Key, f.Rows, f.MSE)
				}
			}
		}
	}
}

// TestSchemaCatches: the schema refuses what the contract forbids.
func TestSchemaCatches(t *testing.T) {
	s := schemaOf(t)
	c, err := compare.Run(context.Background(), table(t), study("y = a + b + c"), compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for name, edit := range map[string]func(*view.Results){
		"null list":       func(r *view.Results) { r.Notes = nil },
		"unknown status":  func(r *view.Results) { r.Alternatives[0].Coefficients[0].Status = "fine" },
		"unknown purpose": func(r *view.Results) { r.Purpose = "impress" },
	} {
		r := view.Build(c, "", "test")
		edit(r)
		b, err := json.Marshal(r)
		if err != nil {
			t.Fatal(err)
		}
		doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(b))
		if err != nil {
			t.Fatal(err)
		}
		if s.Validate(doc) == nil {
			t.Errorf("%s passes the schema", name)
		}
	}
}

// TestSchemaFile: the published file is the one the program prints. UPDATE_GOLDEN=1 rewrites it.
func TestSchemaFile(t *testing.T) {
	const file = "results.schema.json"
	if os.Getenv("UPDATE_GOLDEN") != "" {
		if err := os.WriteFile(file, view.Schema(), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(bytes.ReplaceAll(want, []byte("\r\n"), []byte("\n")), view.Schema()) {
		t.Error("results.schema.json differs from what `modelmend schema` prints; a change of the contract needs thought, then UPDATE_GOLDEN=1 go test")
	}
}

func TestNumbers(t *testing.T) {
	for v, want := range map[float64]string{0: "0", 1: "1", -2.5: "-2.5", 0.1: "0.1", 1.0 / 3: "0.333333333333333", 1e300: "1e+300", 5e-324: "5e-324", 123456789012345680: "123456789012346000",
		math.Inf(1): "null", math.Inf(-1): "null", math.MaxFloat64: "1.7976931348623157e+308"} {
		b, err := view.Num(v).MarshalJSON()
		if err != nil || string(b) != want {
			t.Errorf("%v: got %s, want %s (%v)", v, b, want, err)
		}
	}
	if b, _ := view.None().MarshalJSON(); string(b) != "null" {
		t.Errorf("NaN: %s", b)
	}
	var back view.Num
	if err := json.Unmarshal([]byte("null"), &back); err != nil || !back.IsNone() {
		t.Errorf("null reads as %v", back)
	}
}

// TestCautions: all four, with the number of alternatives looked at.
func TestCautions(t *testing.T) {
	all := ""
	for _, n := range view.Cautions(7) {
		all += n.Text + " "
	}
	for _, want := range []string{"7 alternatives", "too small", "rules of thumb", "association", "referee", "data custodian"} {
		if !strings.Contains(all, want) {
			t.Errorf("cautions do not say %q: %s", want, all)
		}
	}
}
