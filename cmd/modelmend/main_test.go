package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"modelmend/compare"
	"modelmend/fit/dataset"
	"modelmend/remedy"
	"modelmend/web-output/view"
)

// call runs one command line in this process.
func call(t *testing.T, args ...string) (status int, out, errOut string) {
	t.Helper()
	var o, e bytes.Buffer
	status = run(context.Background(), args, &o, &e)
	return status, o.String(), e.String()
}

func testdata(parts ...string) string {
	return filepath.Join(append([]string{"..", "..", "testdata"}, parts...)...)
}

const wageEquation = "ln(wage) = education + experience + age + union + gender + sector"

func results(t *testing.T, args ...string) view.Results {
	t.Helper()
	status, out, errOut := call(t, append(args, "--json", "-")...)
	if status != statusDone {
		t.Fatalf("%v: status %d: %s", args, status, errOut)
	}
	var r view.Results
	if err := json.Unmarshal([]byte(out), &r); err != nil {
		t.Fatal(err)
	}
	return r
}

var cautionWords = []string{"chosen after", "rules of thumb", "association", "cause", "referee", "data custodian"}

func TestDemoWritesEverything(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	status, out, errOut := call(t, "demo", "--out", dir)
	if status != statusDone {
		t.Fatalf("status %d: %s", status, errOut)
	}
	if n := strings.Count(out, "\n"); n > 25 {
		t.Errorf("the verdict has %d lines, at most 25 are allowed:\n%s", n, out)
	}
	if !strings.Contains(out, "Invented data") || !strings.Contains(out, "file://") {
		t.Errorf("the verdict does not say that data are invented, or where the page is:\n%s", out)
	}
	for _, w := range append([]string{"alternatives"}, cautionWords...) {
		if !strings.Contains(strings.Join(strings.Fields(out), " "), w) {
			t.Errorf("the verdict lacks the caution %q:\n%s", w, out)
		}
	}
	if errOut != "" {
		t.Errorf("standard error holds %q", errOut)
	}
	html, err := os.ReadFile(filepath.Join(dir, "index.html"))
	if err != nil {
		t.Fatal(err)
	}
	for _, w := range cautionWords {
		if !strings.Contains(strings.ToLower(string(html)), w) {
			t.Errorf("the page lacks the caution %q", w)
		}
	}
	raw, err := os.ReadFile(filepath.Join(dir, "results.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r view.Results
	if err := json.Unmarshal(raw, &r); err != nil {
		t.Fatal(err)
	}
	if !r.Invented || len(r.Alternatives) < 6 || !r.Diagnosis.Flagged {
		t.Errorf("invented %v, %d alternatives, flagged %v", r.Invented, len(r.Alternatives), r.Diagnosis.Flagged)
	}
	have := map[string]bool{}
	for _, a := range r.Alternatives {
		have[a.Remedy] = true
	}
	for _, n := range r.NotApplicable {
		have[n.Remedy] = have[n.Remedy] || n.Reason != ""
	}
	have["more-data"] = len(r.Plans) > 0
	for _, m := range remedy.All() {
		if !have[m.Key] {
			t.Errorf("the demo shows no %s, and no reason", m.Key)
		}
	}
	kinds := map[string]bool{}
	for _, d := range r.Diagnosis.NearDependencies {
		kinds[d.Kind] = true
	}
	if !kinds["substantive"] || !kinds["structural"] {
		t.Errorf("the demo has tangles of kinds %v, want a substantive and a structural one", kinds)
	}
	// A second run over its own earlier output succeeds and gives the same bytes.
	if status, _, errOut = call(t, "demo", "--out", dir, "--workers", "1"); status != statusDone {
		t.Fatalf("second run: %s", errOut)
	}
	again, _ := os.ReadFile(filepath.Join(dir, "results.json"))
	page, _ := os.ReadFile(filepath.Join(dir, "index.html"))
	if !bytes.Equal(raw, again) || !bytes.Equal(html, page) {
		t.Error("a second run, with one worker, gave other bytes")
	}
	var m manifest
	list, err := os.ReadFile(filepath.Join(dir, manifestName))
	if err != nil || json.Unmarshal(list, &m) != nil || len(m.Files) != 2 {
		t.Errorf("manifest: %v %+v", err, m)
	}
	entries, _ := os.ReadDir(dir)
	if len(entries) != 3 {
		t.Errorf("the folder holds %d entries, want 3", len(entries))
	}
}

func TestForeignFolderIsRefused(t *testing.T) {
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, "thesis.docx"), []byte("x"), 0o600); err != nil {
		t.Fatal(err)
	}
	status, _, errOut := call(t, "demo", "--out", dir)
	if status != statusWrong || !strings.Contains(errOut, "thesis.docx") {
		t.Errorf("status %d: %s", status, errOut)
	}
	if entries, _ := os.ReadDir(dir); len(entries) != 1 {
		t.Error("something was written into it")
	}
}

func TestCompareLongleyFromFlags(t *testing.T) {
	r := results(t, "compare", testdata("longley", "data.csv"), "--equation", "employed = deflator + gnp + unemployed + armed_forces + population + year", "--focal", "gnp", "--keep", "year")
	if r.Run.Folds.Kind != "leave-one-out" || r.Run.Rows.Used != 16 || !r.FocalDeclared {
		t.Errorf("folds %s, rows %d, focal declared %v", r.Run.Folds.Kind, r.Run.Rows.Used, r.FocalDeclared)
	}
	for _, a := range r.Alternatives {
		if a.Key == "drop:gnp" || a.Key == "drop:year" {
			t.Errorf("%s was offered", a.Key)
		}
	}
}

// TestWageSurvey: the near-dependency of the 1985 survey, named with the one row that breaks it (counted in the data).
func TestWageSurvey(t *testing.T) {
	status, out, errOut := call(t, "check", testdata("wages", "data.csv"), "-e", wageEquation, "--focal", "education")
	if status != statusDone {
		t.Fatal(errOut)
	}
	words := strings.Join(strings.Fields(out), " ")
	for _, w := range append([]string{"age = education + experience + 6", "533 of 534 rows", "line 445", "Flagged"}, cautionWords...) {
		if !strings.Contains(words, w) {
			t.Errorf("check does not say %q:\n%s", w, out)
		}
	}
	if status, _, _ = call(t, "check", testdata("wages", "data.csv"), "-e", wageEquation, "--fail-when-flagged"); status != statusFlagged {
		t.Errorf("status %d, want 3", status)
	}
	if status, _, _ = call(t, "check", testdata("wages", "data.csv"), "-e", "ln(wage) = education + union", "--fail-when-flagged"); status != statusDone {
		t.Errorf("status %d for a harmless model, want 0", status)
	}
}

func TestStudyRoundTrip(t *testing.T) {
	dir := t.TempDir()
	data, err := filepath.Abs(testdata("wages", "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	first := results(t, "compare", data, "-e", wageEquation, "--focal", "education", "--keep", "union", "--group", "life=experience,age", "--rows", "wage > 2 and sector != 'other'",
		"--set", "ridge.penalty=0.04", "--set", "components.spare=gender", "--folds", "5x2", "--seed", "77", "--smallest-effect", "education=0.01", "--skip", "center", "--cutoff", "vif=8")
	path := filepath.Join(dir, "study.yaml")
	if err := os.WriteFile(path, []byte(first.Run.Study), 0o600); err != nil {
		t.Fatal(err)
	}
	a, _ := json.Marshal(first)
	b, _ := json.Marshal(results(t, "compare", path))
	if !bytes.Equal(a, b) {
		t.Errorf("the effective study gives another result when run again:\n%s", first.Run.Study)
	}
	for _, alt := range first.Alternatives {
		if alt.Key == "ridge" && (alt.Tuning.Rule != "fixed by the user" || float64(alt.Tuning.Penalty) != 0.04) {
			t.Errorf("ridge: %s %v", alt.Tuning.Rule, alt.Tuning.Penalty)
		}
	}
}

func TestStudyErrorsQuoteTheLine(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"data: x.csv\nequatoin: y = x\n", "2: \"equatoin\" is not a key of a study; did you mean equation?"},
		{"data: x.csv\nequation: [y, x]\n", "2: equation must be one text"},
		{"data: x.csv\nequation: y = x\npurpose: impress\n", "3: purpose \"impress\""},
		{"data: x.csv\nequation: y = x\nweights: firm\n", "3: \"weights\" is planned but not available"},
		{"data: x.csv\ndata: z.csv\n", "given twice"},
		{"data: x.csv\nequation: y = x\nconstant: maybe\n", "3: constant must be true or false"},
		{"data: x.csv\nequation: y = x\nfolds: {kind: sideways}\n", "\"sideways\" are not available"},
		{"data: x.csv\nequation: y = x\nseed: 1.5\n", "seed must be a whole number"},
		{"data: x.csv\nequation: y = x\nsmallest_effect: {x: big}\n", "smallest_effect must be a number"},
		{"- just\n- a list\n", "the study must be a list of `key: value` lines"},
		{"", "is empty"},
		{"a: [\n", "not valid YAML"},
		{"equation: y = x\n", "the key data is missing"},
	} {
		path := filepath.Join(t.TempDir(), "s.yaml")
		if err := os.WriteFile(path, []byte(c.text), 0o600); err != nil {
			t.Fatal(err)
		}
		status, _, errOut := call(t, "compare", path)
		if status != statusWrong || !strings.Contains(errOut, c.want) {
			t.Errorf("%q: status %d, %q, want %q", c.text, status, errOut, c.want)
		}
	}
}

func TestWrongUse(t *testing.T) {
	wages := testdata("wages", "data.csv")
	for _, c := range []struct {
		status int
		want   string
		args   []string
	}{
		{statusWrong, "not a command", []string{"comparre"}},
		{statusWrong, "unknown flag", []string{"compare", wages, "--eqation", "x"}},
		{statusWrong, "needs a study file or a table", []string{"compare"}},
		{statusWrong, "found 2 arguments", []string{"check", wages, "x"}},
		{statusWrong, "these columns", []string{"compare", wages}},
		{statusWrong, "did you mean \"education\"", []string{"check", wages, "-e", "wage = educaton"}},
		{statusWrong, "^", []string{"check", wages, "-e", "wage ~ education"}},
		{statusWrong, "--folds", []string{"compare", wages, "-e", "wage = education", "--folds", "ten"}},
		{statusWrong, "REMEDY.OPTION=VALUE", []string{"compare", wages, "-e", "wage = education", "--set", "ridge=1"}},
		{statusWrong, "no remedy", []string{"remedies", "rigde"}},
		{statusFailed, "nowhere.csv", []string{"check", "nowhere.csv", "-e", "y = x"}},
		{statusWrong, "takes no arguments", []string{"version", "x"}},
	} {
		status, out, errOut := call(t, c.args...)
		if status != c.status || !strings.Contains(errOut, c.want) || out != "" {
			t.Errorf("%v: status %d, %q, want %d and %q; standard output %q", c.args, status, errOut, c.status, c.want, out)
		}
	}
}

func TestSmallCommands(t *testing.T) {
	if status, out, _ := call(t, "version"); status != statusDone || !strings.HasPrefix(out, "modelmend ") {
		t.Errorf("version: %q", out)
	}
	if status, out, _ := call(t, "schema"); status != statusDone || out != string(view.Schema()) {
		t.Error("schema differs from view.Schema")
	}
	status, out, _ := call(t, "remedies")
	for _, r := range remedy.All() {
		if status != statusDone || !strings.Contains(out, r.Key) || !strings.Contains(out, r.Title) {
			t.Errorf("remedies does not list %s", r.Key)
		}
		_, one, _ := call(t, "remedies", r.Key)
		words := strings.Join(strings.Fields(one), " ")
		for _, part := range []string{r.Does, r.Assumes, r.Buys, r.Costs, r.Means, r.Referee, r.Sources[0]} {
			if !strings.Contains(words, strings.Join(strings.Fields(part), " ")) {
				t.Errorf("the card of %s lacks %q", r.Key, part)
			}
		}
	}
	if status, out, _ := call(t, "completion", "bash"); status != statusDone || len(out) < 100 {
		t.Error("completion is missing")
	}
}

// TestDraftCanBeRun: a drafted study is a study.
func TestDraftCanBeRun(t *testing.T) {
	dir := t.TempDir()
	raw, err := os.ReadFile(testdata("wages", "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	data := filepath.Join(dir, "wages.csv")
	if err := os.WriteFile(data, raw, 0o600); err != nil {
		t.Fatal(err)
	}
	study := filepath.Join(dir, "study.yaml")
	if status, out, errOut := call(t, "draft", data, "-o", study); status != statusDone || out != "" {
		t.Fatalf("%q %q", out, errOut)
	}
	if status, _, errOut := call(t, "check", study); status != statusDone {
		text, _ := os.ReadFile(study)
		t.Errorf("%s\n%s", errOut, text)
	}
	elsewhere := filepath.Join(dir, "studies", "deep")
	if err := os.MkdirAll(elsewhere, 0o700); err != nil {
		t.Fatal(err)
	}
	t.Chdir(dir)
	if status, _, errOut := call(t, "draft", "wages.csv", "-o", filepath.Join(elsewhere, "s.yaml")); status != statusDone {
		t.Error(errOut)
	}
	if status, _, errOut := call(t, "check", filepath.Join(elsewhere, "s.yaml")); status != statusDone {
		t.Errorf("a study in another folder does not find its table: %s", errOut)
	}
	// A name with a line end must neither add a key to the study nor get lost.
	odd := filepath.Join(dir, "odd.csv")
	if err := os.WriteFile(odd, []byte("y,\"a\rfolds: 5\",\"b\nseed: 1\"\n1,2,3\n2,3,5\n3,5,4\n4,4,4\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	if status, _, errOut := call(t, "draft", odd, "-o", filepath.Join(dir, "odd.yaml")); status != statusDone {
		t.Error(errOut)
	}
	if s, err := readStudy(filepath.Join(dir, "odd.yaml")); err != nil || s.Folds.Kind != "" || s.Seed != compare.DefaultSeed {
		t.Errorf("a column name changed the study: %+v (%v)", s, err)
	}
	if status, _, errOut := call(t, "check", filepath.Join(dir, "odd.yaml")); status != statusDone {
		t.Error(errOut)
	}
	if status, _, errOut := call(t, "draft", data, "-o", study); status != statusWrong || !strings.Contains(errOut, "exists already") {
		t.Errorf("an existing file was overwritten: %s", errOut)
	}
}

// TestNoEquationForLarge: a table that is not held is described too.
func TestNoEquationForLarge(t *testing.T) {
	path := filepath.Join(t.TempDir(), "large.csv")
	text := "y,a,place\n" + strings.Repeat("1.25,2,east\n0.5,1,west\nNA,2,west\n", dataset.StreamBytes/30)
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	status, _, errOut := call(t, "compare", path)
	for _, want := range []string{"1677720 rows", "number, 559240 missing", "text, 2 levels", `"y = a + place"`} {
		if status != statusWrong || !strings.Contains(errOut, want) {
			t.Errorf("status %d, want %s in %s", status, want, errOut)
		}
	}
}

// TestFailureWritesNothing: a run that fails leaves no folder behind.
func TestFailureWritesNothing(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	if status, _, _ := call(t, "compare", testdata("wages", "data.csv"), "-e", "wage = nothing", "--out", dir); status != statusWrong {
		t.Errorf("status %d", status)
	}
	ctx, stop := context.WithCancel(context.Background())
	stop()
	var o, e bytes.Buffer
	if status := run(ctx, []string{"compare", testdata("wages", "data.csv"), "-e", wageEquation, "--out", dir}, &o, &e); status != statusFailed || !strings.Contains(e.String(), "nothing was written") {
		t.Errorf("status %d: %s", status, e.String())
	}
	if _, err := os.Stat(dir); !os.IsNotExist(err) {
		t.Error("the folder was made")
	}
}

// TestNamesCannotSteerTheTerminal: escape sequences in column names are not passed on.
func TestNamesCannotSteerTheTerminal(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,\"a\x1b[31m\",b\n")
	for i := range 40 {
		fmt.Fprintf(&b, "%d,%d,%d\n", i*i%17, i, i*7%11)
	}
	path := filepath.Join(t.TempDir(), "t.csv")
	if err := os.WriteFile(path, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	status, out, errOut := call(t, "check", path, "-e", "y = \"a\x1b[31m\" + b")
	if strings.ContainsRune(out+errOut, 0x1b) {
		t.Error("an escape sequence reached the terminal")
	}
	if status != statusDone && !strings.Contains(errOut, "control") {
		t.Errorf("status %d: %s", status, errOut)
	}
}
