// Package browser drives the page in real Chromium: what the program writes is opened from disk, used by mouse and by keyboard, audited
// and photographed. A missing browser is a failure, never a skip.
package browser

import (
	"context"
	"fmt"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	"github.com/chromedp/cdproto/page"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
)

var root = filepath.Join("..", "..")

// program is built once.
var program = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "modelmend")
	if err != nil {
		return "", err
	}
	path := filepath.Join(dir, "modelmend")
	cmd := exec.Command("go", "build", "-o", path, "./cmd/modelmend")
	cmd.Dir = root
	if out, err := cmd.CombinedOutput(); err != nil {
		return "", fmt.Errorf("%w: %s", err, out)
	}
	return path, nil
})

var browser = sync.OnceValues(func() (context.Context, error) {
	if _, err := os.Stat("/usr/bin/chromium"); err != nil {
		return nil, fmt.Errorf("chromium is missing: %w", err)
	}
	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.ExecPath("/usr/bin/chromium"), chromedp.DisableGPU,
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-dev-shm-usage", true))
	if os.Getuid() == 0 {
		opts = append(opts, chromedp.NoSandbox)
	}
	ctx, _ := chromedp.NewExecAllocator(context.Background(), opts...)
	ctx, _ = chromedp.NewContext(ctx)
	return ctx, chromedp.Run(ctx)
})

func TestMain(m *testing.M) {
	status := m.Run()
	if ctx, err := browser(); err == nil {
		chromedp.Cancel(ctx)
	}
	if path, err := program(); err == nil {
		os.RemoveAll(filepath.Dir(path))
	}
	os.Exit(status)
}

// write runs the program in the project's root and returns the page it wrote.
func write(t *testing.T, args ...string) string {
	t.Helper()
	path, err := program()
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(t.TempDir(), "out")
	cmd := exec.Command(path, append(args, "--out", dir)...)
	cmd.Dir = root
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	return filepath.Join(dir, "index.html")
}

// tab is one open page with everything the browser complained about.
type tab struct {
	*testing.T
	ctx      context.Context
	mu       sync.Mutex
	requests []string
	notes    []string
}

// open loads a file at a size and waits until the page says that it is ready.
func open(t *testing.T, file, hash string, width, height int64, media ...*emulation.MediaFeature) *tab {
	t.Helper()
	base, err := browser()
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := chromedp.NewContext(base)
	t.Cleanup(cancel)
	ctx, stop := context.WithTimeout(ctx, 60*time.Second)
	t.Cleanup(stop)
	b := &tab{T: t, ctx: ctx}
	chromedp.ListenTarget(ctx, func(e any) {
		b.mu.Lock()
		defer b.mu.Unlock()
		switch e := e.(type) {
		case *network.EventRequestWillBeSent:
			if u := e.Request.URL; !strings.HasPrefix(u, "data:") && !strings.HasPrefix(u, "blob:") {
				b.requests = append(b.requests, u)
			}
		case *runtime.EventExceptionThrown:
			b.notes = append(b.notes, "exception: "+e.ExceptionDetails.Error())
		case *runtime.EventConsoleAPICalled:
			if e.Type == runtime.APITypeError || e.Type == runtime.APITypeWarning {
				text := ""
				for _, a := range e.Args {
					text += string(a.Value) + " "
				}
				b.notes = append(b.notes, "console: "+text)
			}
		case *log.EventEntryAdded:
			b.notes = append(b.notes, "log: "+e.Entry.Text)
		}
	})
	address := (&url.URL{Scheme: "file", Path: file}).String() + hash
	b.do(network.Enable(), log.Enable(),
		chromedp.ActionFunc(func(ctx context.Context) error {
			_, err := page.AddScriptToEvaluateOnNewDocument(`addEventListener("securitypolicyviolation", e => console.error("policy: " + e.violatedDirective + " " + e.blockedURI))`).Do(ctx)
			return err
		}),
		emulation.SetDeviceMetricsOverride(width, height, 1, width < 500),
		emulation.SetEmulatedMedia().WithFeatures(media),
		chromedp.Navigate(address),
		chromedp.WaitReady(`html[data-ready="1"]`, chromedp.ByQuery))
	return b
}

func (b *tab) do(actions ...chromedp.Action) {
	b.Helper()
	if err := chromedp.Run(b.ctx, actions...); err != nil {
		b.mu.Lock()
		defer b.mu.Unlock()
		b.Fatalf("%v\nthe browser noted: %v", err, b.notes)
	}
}

// eval returns what an expression gives.
func eval[T any](b *tab, expression string) T {
	b.Helper()
	var out T
	b.do(chromedp.Evaluate(expression, &out))
	return out
}

// quiet fails when the browser complained or asked for more than the file.
func (b *tab) quiet() {
	b.Helper()
	b.mu.Lock()
	defer b.mu.Unlock()
	if len(b.requests) != 1 {
		b.Errorf("%d requests, want the file alone: %v", len(b.requests), b.requests)
	}
	for _, n := range b.notes {
		b.Errorf("the browser noted: %s", n)
	}
}

// wide names what stands out sideways.
func wide(b *tab) string {
	b.Helper()
	return eval[string](b, `[...document.querySelectorAll("body *")].filter(e => e.getBoundingClientRect().right > 361 && !e.closest(".scroll") && !e.closest(".visually-hidden")).slice(0, 8).map(e => e.tagName + "." + (e.getAttribute("class") || e.id)).join(" ")`)
}

// picture saves what is seen, the whole page, under .ci/pictures.
func (b *tab) picture(name string) {
	b.Helper()
	height := eval[int64](b, `document.documentElement.scrollHeight`)
	width := eval[int64](b, `window.innerWidth`)
	var png []byte
	b.do(emulation.SetDeviceMetricsOverride(width, min(height, 14000), 1, width < 500), page.BringToFront(), chromedp.Sleep(400*time.Millisecond), chromedp.CaptureScreenshot(&png))
	save(b.T, name+".png", png)
}

func save(t *testing.T, name string, content []byte) {
	t.Helper()
	dir := filepath.Join(root, ".ci", "pictures")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, name), content, 0o644); err != nil {
		t.Fatal(err)
	}
}

// printed saves the page as PDF and its sheets as pictures.
func (b *tab) printed(name string) {
	b.Helper()
	var pdf []byte
	b.do(chromedp.ActionFunc(func(ctx context.Context) error {
		var err error
		pdf, _, err = page.PrintToPDF().WithPreferCSSPageSize(false).WithPaperWidth(8.27).WithPaperHeight(11.69).WithPrintBackground(true).Do(ctx)
		return err
	}))
	save(b.T, name+".pdf", pdf)
	file := filepath.Join(root, ".ci", "pictures", name)
	if out, err := exec.Command("pdftoppm", "-r", "60", "-png", file+".pdf", file).CombinedOutput(); err != nil {
		b.Fatalf("pdftoppm: %v: %s", err, out)
	}
}

func dark() *emulation.MediaFeature {
	return &emulation.MediaFeature{Name: "prefers-color-scheme", Value: "dark"}
}

func still() *emulation.MediaFeature {
	return &emulation.MediaFeature{Name: "prefers-reduced-motion", Value: "reduce"}
}

const wages = "ln(wage) = education + experience + age + union + gender + sector"

// studies are the pages that are looked at.
var studies = []struct {
	name string
	args []string
}{
	{"demo", []string{"demo"}},
	{"wages", []string{"compare", "testdata/wages/data.csv", "--equation", wages, "--focal", "education"}},
	{"longley", []string{"compare", "testdata/longley/data.csv", "--equation", "employed = deflator + gnp + unemployed + armed_forces + population + year", "--focal", "gnp", "--time", "year"}},
	{"imports", []string{"compare", "testdata/french-imports/data.csv", "--equation", "import = doprod + stock + consum", "--rows", "year <= 1959", "--focal", "consum"}},
	{"firms", []string{"compare", "testdata/petersen/data.csv", "--equation", "y = x", "--clusters", "firm,year", "--folds", "10x2", "--resamples", "199", "--simulations", "200"}},
}

// TestPagesLoadAlone: one request, no error, no policy violation; no sideways scrolling at 360 px; pictures of desktop, phone, dark and print.
func TestPagesLoadAlone(t *testing.T) {
	for _, s := range studies {
		t.Run(s.name, func(t *testing.T) {
			file := write(t, s.args...)
			b := open(t, file, "", 1280, 1000)
			if n := eval[int](b, `document.querySelectorAll(".chart svg").length`); n < 5 {
				t.Errorf("%d charts are drawn", n)
			}
			b.picture(s.name + "-desktop")
			b.quiet()
			phone := open(t, file, "", 360, 800, still())
			if w := eval[int](phone, `document.documentElement.scrollWidth`); w > 360 {
				t.Errorf("the page is %d px wide on a phone of 360 px: %s", w, wide(phone))
			}
			phone.picture(s.name + "-phone")
			phone.quiet()
			night := open(t, file, "", 1280, 1000, dark())
			night.picture(s.name + "-dark")
			night.printed(s.name + "-print")
			night.quiet()
		})
	}
}
