package page_test

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	unescape "html"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/dataset"
	"modelmend/fit/equation"
	"modelmend/web-output/page"
	"modelmend/web-output/view"
)

func render(t *testing.T, csv, eq string, edit func(*compare.Study)) string {
	t.Helper()
	table, err := dataset.Read(strings.NewReader(csv), "table.csv")
	if err != nil {
		t.Fatal(err)
	}
	s := &compare.Study{Data: "table.csv", Equation: eq, Purpose: compare.Explain, Seed: 1, Cutoffs: collinear.DefaultCutoffs()}
	if edit != nil {
		edit(s)
	}
	c, err := compare.Run(context.Background(), table, s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return write(t, view.Build(c, "data: table.csv\nequation: "+eq+"\n", "test"))
}

func write(t *testing.T, r *view.Results) string {
	t.Helper()
	var b bytes.Buffer
	if err := page.Write(&b, r); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// numbers makes rows of p regressors with a tangle between the first two.
func numbers(rows, p int) string {
	var b strings.Builder
	b.WriteString("y")
	for j := range p {
		fmt.Fprintf(&b, ",x%d", j)
	}
	b.WriteByte('\n')
	state := uint64(9)
	next := func() float64 {
		state = state*6364136223846793005 + 1442695040888963407
		return float64(state>>40) / float64(1<<24)
	}
	for range rows {
		first := next()
		fmt.Fprintf(&b, "%.5f", first+next())
		for j := range p {
			v := next()
			if j < 2 {
				v = first + 0.1*v
			}
			fmt.Fprintf(&b, ",%.5f", v)
		}
		b.WriteByte('\n')
	}
	return b.String()
}

func terms(p int) string {
	var t []string
	for j := range p {
		t = append(t, fmt.Sprintf("x%d", j))
	}
	return "y = " + strings.Join(t, " + ")
}

var remote = regexp.MustCompile(`(?i)(src|href)\s*=\s*["']?\s*(https?:)?//`)

// sane checks what must hold of every page.
func sane(t *testing.T, html string) {
	t.Helper()
	if !strings.Contains(unescape.UnescapeString(html), "default-src 'none'; script-src 'sha256-") {
		t.Error("the page has no strict policy")
	}
	if m := remote.FindString(html); m != "" {
		t.Errorf("the page refers to something remote: %s", m)
	}
	for _, want := range []string{`<html lang="en">`, "Content-Security-Policy", `id="view"`, "No row leaves your machine"} {
		if !strings.Contains(html, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	if strings.Count(html, "<h1") != 1 {
		t.Error("the page has not exactly one h1")
	}
	if n := strings.Count(html, "<script"); n != 3 {
		t.Errorf("the page has %d script elements, want 3", n)
	}
	if strings.Contains(html, "ZgotmplZ") || strings.Contains(html, "<no value>") {
		t.Error("the template refused or lacked a value")
	}
	for _, w := range []string{"too small", "rules of thumb", "association", "referee", "data custodian"} {
		if !strings.Contains(html[:strings.Index(html, "<main>")], w) {
			t.Errorf("the first screen lacks the caution %q", w)
		}
	}
	data := html[strings.Index(html, `id="view">`)+len(`id="view">`):]
	data = data[:strings.Index(data, "</script>")]
	var v any
	if err := json.Unmarshal([]byte(data), &v); err != nil {
		t.Errorf("the data block is not JSON: %v", err)
	}
}

func TestModelsOfEverySize(t *testing.T) {
	for name, html := range map[string]string{
		"one regressor":          render(t, numbers(40, 1), terms(1), nil),
		"sixty regressors":       render(t, numbers(200, 60), terms(60), func(s *compare.Study) { s.Folds = compare.FoldSpec{Kind: "random", Count: 3, Repeats: 1} }),
		"twelve rows":            render(t, numbers(12, 3), terms(3), nil),
		"no constant":            render(t, numbers(40, 3), terms(3), func(s *compare.Study) { s.NoConstant = true }),
		"exact dependency":       render(t, numbers(40, 3), terms(3)+" + (x0+x1)", nil),
		"more columns than rows": render(t, numbers(8, 9), terms(9), nil),
		"powers":                 render(t, numbers(60, 3), "y = x0 + x0^2 + x0*x2 + x2 + x1", func(s *compare.Study) { s.Focal = []string{"x0"} }),
	} {
		t.Run(name, func(t *testing.T) { sane(t, html) })
	}
}

func TestDiagnosisAlone(t *testing.T) {
	table, err := dataset.Read(strings.NewReader(numbers(30, 2)), "table.csv")
	if err != nil {
		t.Fatal(err)
	}
	c, err := compare.Check(context.Background(), table, &compare.Study{Data: "table.csv", Equation: terms(2), Purpose: compare.Explain, Cutoffs: collinear.DefaultCutoffs()}, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	sane(t, write(t, view.Build(c, "", "test")))
}

// TestHostileNames: names that attack stand in the page as text only.
func TestHostileNames(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "hostile", "names.csv"))
	if err != nil {
		t.Fatal(err)
	}
	table, err := dataset.Read(bytes.NewReader(raw), "names.csv")
	if err != nil {
		t.Fatal(err)
	}
	var parts []string
	for _, c := range table.Columns[1:] {
		parts = append(parts, equation.Quote(c.Name))
	}
	html := render(t, string(raw), "y = "+strings.Join(parts, " + "), func(s *compare.Study) { s.ShowSmallCells = true })
	sane(t, html)
	for _, bad := range []string{"<script>alert", "<img", "<b>bold", "onerror=alert(3)>"} {
		if strings.Contains(html, bad) {
			t.Errorf("the page holds %q unescaped", bad)
		}
	}
}

// TestNoRowLeaves: no value of a single row stands in the page or the results. Each row carries a number found nowhere else.
func TestNoRowLeaves(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,a,b\n")
	var unique []string
	for i := range 60 {
		u := fmt.Sprintf("%d.%06d", 31+i, (i*7919+104729)%1000000)
		unique = append(unique, u)
		fmt.Fprintf(&b, "%d,%s,%d\n", i*i%23, u, i*13%29)
	}
	html := render(t, b.String(), "y = a + b", nil)
	for _, u := range unique {
		if strings.Contains(html, u) {
			t.Errorf("the value %s of one row stands in the page", u)
		}
	}
}

// TestSmallPartsAreNotDrawn: where parts are small the page says so in place of the picture.
func TestSmallPartsAreNotDrawn(t *testing.T) {
	for rows, drawn := range map[int]bool{20: false, 60: false, 120: true} {
		html := render(t, numbers(rows, 3), terms(3), nil)
		if said := strings.Contains(html, "errors are not shown part by part."); said == drawn || strings.Contains(html, `data-chart="folds"`) != drawn {
			t.Errorf("%d rows: said %v, drawn %v", rows, said, !drawn)
		}
	}
}

// TestResampledOrNot: with resamples the page has thin lines, their legend, sentences and what was chosen; without it says so once and has
// none of them.
func TestResampledOrNot(t *testing.T) {
	marks := []string{`class="again"`, `class="legend"`, "Repeated 99 times on resampled rows", "<small>resampled ", "In 99 resamples the chosen penalty", "chosen in resamples", `"id":"chosen"`, "never mixed", "99 resamples, each of 40 rows"}
	with := render(t, numbers(40, 3), terms(3), func(s *compare.Study) { s.Resamples = 99 })
	without := render(t, numbers(40, 3), terms(3), nil)
	sane(t, with)
	body := func(html string) string { return html[strings.Index(html, "<main>"):] }
	for _, m := range marks {
		if !strings.Contains(body(with), m) {
			t.Errorf("with resamples the page lacks %q", m)
		}
		if strings.Contains(strings.Split(body(without), "<script>")[0], m) {
			t.Errorf("without resamples the page holds %q", m)
		}
	}
	if n := strings.Count(without, "The procedure was not resampled."); n < 2 {
		t.Errorf("without resamples the page says so %d times, want at the ladder and in the record", n)
	}
	if more := len(with) - len(without); more > 60_000 {
		t.Errorf("what was resampled adds %d bytes", more)
	}
}

// TestTruthsOrNot: with samples the part has an answer, a drawing a row, every truth in one table; without, the reason in one line.
func TestTruthsOrNot(t *testing.T) {
	part := func(html string) string {
		s := html[strings.Index(html, `<section id="truths"`):]
		return s[:strings.Index(s, "</section>")]
	}
	with := render(t, numbers(60, 3), terms(3), func(s *compare.Study) { s.Simulations, s.Focal = 40, []string{"x0", "x2"} })
	sane(t, with)
	got := part(with)
	rows := strings.Count(got, "data-truth=")
	if rows < 5 || strings.Count(got, `class="nominal"`) != rows+1 {
		t.Errorf("%d rows, %d lines of what is promised", rows, strings.Count(got, `class="nominal"`))
	}
	// Three truths of two coefficients.
	if n := strings.Count(got, `scope="rowgroup"`); n != 6 {
		t.Errorf("%d truths in the table, want 6", n)
	}
	for _, want := range []string{"If the truth is what was estimated, ", `<option value="1">x2</option>`, "40 samples for each truth", "of x0</span> is in truth"} {
		if !strings.Contains(got, want) {
			t.Errorf("the part lacks %q", want)
		}
	}
	without := part(render(t, numbers(60, 3), terms(3), nil))
	if !strings.Contains(without, "Nothing was simulated: the study asks for no simulated samples.") || strings.Contains(without, "<table") || strings.Contains(without, "<input") {
		t.Errorf("without samples the part is %s", without)
	}
}

// TestKindsOfError: every kind stands in the page without script; where one alone was computed there is no choice but a line.
func TestKindsOfError(t *testing.T) {
	table, err := dataset.Read(strings.NewReader(numbers(60, 3)), "table.csv")
	if err != nil {
		t.Fatal(err)
	}
	s := &compare.Study{Data: "table.csv", Equation: terms(3), Purpose: compare.Explain, Seed: 1, Cutoffs: collinear.DefaultCutoffs()}
	c, err := compare.Run(context.Background(), table, s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	r := view.Build(c, "", "test")
	many := write(t, r)
	for _, want := range []string{`name="kind" value="1"`, "<li><strong>robust</strong>: standard error ", "factor realised", "Classical: errors are independent and of equal variance.", "whatever kind of standard error is shown"} {
		if !strings.Contains(many, want) {
			t.Errorf("with two kinds the page lacks %q", want)
		}
	}
	r.Run.StandardErrors = r.Run.StandardErrors[:1]
	for i := range r.Diagnosis.Ledger {
		r.Diagnosis.Ledger[i].Others = nil
	}
	one := write(t, r)
	sane(t, one)
	if strings.Contains(one, `name="kind" value`) || strings.Contains(one, "factor realised") || !strings.Contains(one, "Standard errors of one kind were computed.") {
		t.Error("with one kind the page offers a choice, or does not say that there is none")
	}
}

// TestLeakingFolds: where folds leak both errors stand side by side, and the note names the leak; the part says how folds were drawn.
func TestLeakingFolds(t *testing.T) {
	lines := strings.Split(strings.TrimSpace(numbers(80, 3)), "\n")
	lines[0] += ",g,t"
	for i := range lines[1:] {
		lines[i+1] += fmt.Sprintf(",%d,%d", i%20, i)
	}
	csv := strings.Join(lines, "\n") + "\n"
	for _, k := range []struct {
		edit func(*compare.Study)
		want []string
		leak bool
	}{
		{func(s *compare.Study) {
			s.Clusters, s.Folds = []string{"g"}, compare.FoldSpec{Kind: "random", Count: 5, Repeats: 2}
		}, []string{"Rows are dealt at random into 5 folds, twice;", "folds of kind random, as asked for", "whole clusters held out", "leaks into the training rows"}, true},
		{func(s *compare.Study) { s.Clusters, s.Folds = []string{"g"}, compare.FoldSpec{Count: 5, Repeats: 1} }, []string{"Whole clusters are dealt into 5 folds, once, so that no cluster stands on both sides of a split;"}, false},
		{func(s *compare.Study) { s.Time = "t" }, []string{"Time is cut into 10 stretches of neighbouring periods, each held out in turn;"}, false},
		{func(s *compare.Study) { s.Time, s.Folds = "t", compare.FoldSpec{Kind: "rolling", Count: 4, Gap: 2} }, []string{"The last 4 segments of time are held out in turn, each predicted from earlier periods alone, the 2 periods just before it left out;", "Time is cut into 7 segments"}, false},
	} {
		html := render(t, csv, terms(3), k.edit)
		sane(t, html)
		for _, want := range k.want {
			if !strings.Contains(html, want) {
				t.Errorf("the page lacks %q", want)
			}
		}
		if strings.Contains(html, "as asked for") != k.leak {
			t.Errorf("errors side by side: %v, want %v", !k.leak, k.leak)
		}
	}
}

// TestFigures holds the Go twin to a table made by hand; format.test.js holds the other to the same.
func TestFigures(t *testing.T) {
	raw, err := os.ReadFile("testdata/figures.json")
	if err != nil {
		t.Fatal(err)
	}
	var rows [][3]any
	if err := json.Unmarshal(raw, &rows); err != nil {
		t.Fatal(err)
	}
	for _, r := range rows {
		v := math.NaN()
		if r[0] != nil {
			v = r[0].(float64)
		}
		if got := page.Figure(v, int(r[1].(float64))); got != r[2] {
			t.Errorf("%v with %v digits: got %q, want %q", r[0], r[1], got, r[2])
		}
	}
}

// TestVendoredLibrary holds the hash stated in VENDOR.md and what must not stand in an inlined script.
func TestVendoredLibrary(t *testing.T) {
	dir := filepath.Join("assets", "third-party", "echarts")
	lib, err := os.ReadFile(filepath.Join(dir, "echarts.js"))
	if err != nil {
		t.Fatal(err)
	}
	note, err := os.ReadFile(filepath.Join(dir, "VENDOR.md"))
	if err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256(lib)
	if !bytes.Contains(note, []byte(hex.EncodeToString(sum[:]))) {
		t.Errorf("VENDOR.md does not state the SHA-256 of the file, %x", sum)
	}
	for _, bad := range []string{"</script", "<!--", "\r", "eval(", "new Function"} {
		if bytes.Contains(lib, []byte(bad)) {
			t.Errorf("the library holds %q", bad)
		}
	}
	for _, m := range regexp.MustCompile(`https?://[^"'\x60 ]+`).FindAll(lib, -1) {
		if !bytes.HasPrefix(m, []byte("http://www.w3.org/")) {
			t.Errorf("the library names the address %s", m)
		}
	}
	for _, l := range []string{"LICENSE-echarts", "NOTICE-echarts", "LICENSE-zrender", "LICENSE-d3", "LICENSE-tslib"} {
		if _, err := os.Stat(filepath.Join(dir, l)); err != nil {
			t.Error(err)
		}
	}
}

// TestJoinedScript: the modules joined are valid script without module words, and no name stands twice at the top. The syntax check
// needs node and is left to .ci/run where there is none.
func TestJoinedScript(t *testing.T) {
	script, err := page.Script()
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range strings.Split(script, "\n") {
		if strings.HasPrefix(line, "import ") || strings.HasPrefix(line, "export ") {
			t.Errorf("a module word is left: %s", line)
		}
	}
	seen := map[string]bool{}
	for _, m := range regexp.MustCompile(`(?m)^(?:async )?(?:function|const|let|class) (\w+)`).FindAllStringSubmatch(script, -1) {
		if seen[m[1]] {
			t.Errorf("%s is declared twice", m[1])
		}
		seen[m[1]] = true
	}
	if strings.Contains(script, "innerHTML") || strings.Contains(script, "</script") {
		t.Error("the script holds innerHTML or closes its own element")
	}
	if node, err := exec.LookPath("node"); err == nil {
		file := filepath.Join(t.TempDir(), "page.js")
		if err := os.WriteFile(file, []byte(script), 0o600); err != nil {
			t.Fatal(err)
		}
		if out, err := exec.Command(node, "--check", file).CombinedOutput(); err != nil {
			t.Errorf("node --check: %s", out)
		}
	}
}

// failing refuses to be written to.
type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, os.ErrClosed }

func TestWriteReportsFailure(t *testing.T) {
	if err := page.Write(failing{}, &view.Results{Run: view.Run{}, Diagnosis: view.Diagnosis{}}); err == nil {
		t.Error("a failed write went unnoticed")
	}
}
