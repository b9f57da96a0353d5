package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"time"
	"unicode/utf8"

	"modelmend/fit/figures"
	"modelmend/web-output/view"
)

// width is the measure of the terminal text.
const width = 100

// wrap breaks text at blanks, further lines indented.
func wrap(text, indent string) []string {
	var lines []string
	line := ""
	for _, w := range strings.Fields(text) {
		if line != "" && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(w) > width {
			lines = append(lines, line)
			line = indent + w
			continue
		}
		if line == "" {
			line = w
		} else {
			line += " " + w
		}
	}
	return append(lines, line)
}

// caution is the one line that every terminal report ends with.
func caution(r *view.Results) string {
	looked := "a remedy chosen after looking has too small a standard error"
	if n := len(r.Alternatives); n > 0 {
		looked = fmt.Sprintf("of %d alternatives, one chosen after looking has too small a standard error", n)
	}
	return "Cautions: " + looked + "; cut-offs are rules of thumb; association is not cause; your field, referee and data custodian decide."
}

// rowsLine says what was read and used.
func rowsLine(r *view.Results) string {
	s := fmt.Sprintf("%s: %d rows read, %d used", r.Run.Data, r.Run.Rows.Read, r.Run.Rows.Used)
	var parts []string
	for _, a := range r.Run.Rows.SetAside {
		p := fmt.Sprintf("%d %s", a.Count, a.Reason)
		if a.Column != "" {
			p += " (" + a.Column + ")"
		}
		parts = append(parts, p)
	}
	if len(parts) > 4 {
		rest := 0
		for _, a := range r.Run.Rows.SetAside[4:] {
			rest += a.Count
		}
		parts = append(parts[:4], fmt.Sprintf("%d for other reasons", rest))
	}
	if len(parts) > 0 {
		s += "; set aside: " + strings.Join(parts, ", ")
	}
	return s + "."
}

// compareText is the verdict of `compare`, at most 25 lines.
func compareText(r *view.Results, dir string) string {
	var lines []string
	if r.Invented {
		lines = append(lines, "Invented data: this study shows what the tool does and says nothing about the world.")
	}
	lines = append(lines, wrap(rowsLine(r), "  ")...)
	var said []string
	for _, v := range r.Verdict {
		said = append(said, wrap("- "+v, "  ")...)
	}
	closing := append([]string{""}, wrap(caution(r), "  ")...)
	closing = append(closing, "Page: "+fileAddress(dir+"/index.html"))
	ladder := ladderLines(r)
	room := 25 - len(lines) - len(closing) - 1
	if room < len(said) {
		said = append(said[:max(room-1, 0)], "  (the page says more)")
	}
	lines = append(lines, said...)
	room -= len(said)
	if room >= 4 {
		lines = append(lines, "")
		lines = append(lines, shorten(ladder, room)...)
	}
	return strings.Join(append(lines, closing...), "\n") + "\n"
}

// shorten keeps a table within so many lines, the last saying how many are left out.
func shorten(lines []string, room int) []string {
	if len(lines) <= room {
		return lines
	}
	return append(lines[:room-1:room-1], fmt.Sprintf("  and %d more alternatives on the page", len(lines)-room+1))
}

// ladderLines shows the first focal coefficient under each alternative.
func ladderLines(r *view.Results) []string {
	if len(r.Focal) == 0 || len(r.Alternatives) == 0 {
		return nil
	}
	name := r.Focal[0]
	for _, d := range r.Alternatives[0].Derived {
		if d.Name == "effect of "+name {
			name = d.Name
		}
	}
	labelWidth := 12
	for _, a := range r.Alternatives {
		labelWidth = max(labelWidth, min(34, utf8.RuneCountInString(a.Label)))
	}
	resampled := r.Run.Resampling.Count > 0
	spread := func(text string) string { // one more column
		if !resampled {
			return ""
		}
		return fmt.Sprintf("%12s", text)
	}
	out := []string{fmt.Sprintf("%s %12s %16s%s %20s", pad(name, labelWidth), "coefficient", "standard error", spread("resampled"), "out-of-sample error")}
	base, _ := find(r.Alternatives[0], name)
	alike := 0
	for i, a := range r.Alternatives {
		k, ok := find(a, name)
		if !ok {
			continue
		}
		if i > 0 && nearly(k, base) {
			alike++
			continue
		}
		status := k.Status
		if status == "estimated" {
			status = ""
		}
		again := "-"
		if k.Resampled != nil {
			again = cell(k.Resampled.StandardError)
		}
		out = append(out, strings.TrimRight(fmt.Sprintf("%s %12s %16s%s %20s  %s", pad(a.Label, labelWidth), cell(k.Estimate), cell(k.StandardError), spread(again), view.Four(a.OutOfSample.RMSE), status), " "))
	}
	if kinds := r.Run.StandardErrors; len(kinds) > 0 && kinds[0].Kind != "classical" {
		text, _, _ := strings.Cut(kinds[0].Text, ":")
		out[0] += "  (" + text + " errors)"
	}
	if alike > 0 {
		out = append(out, fmt.Sprintf("(%d more leave it within 5 %% of what it is when left alone)", alike))
	}
	return out
}

// nearly: the same coefficient within 5 per cent, and its standard error too.
func nearly(k, base view.Coefficient) bool {
	near := func(a, b view.Num) bool { return math.Abs(float64(a)-float64(b)) <= 0.05*math.Abs(float64(b)) }
	return k.Status == base.Status && near(k.Estimate, base.Estimate) && near(k.StandardError, base.StandardError)
}

func find(a view.Alternative, name string) (view.Coefficient, bool) {
	for _, list := range [][]view.Coefficient{a.Derived, a.Coefficients} {
		for _, k := range list {
			if k.Name == name {
				return k, true
			}
		}
	}
	return view.Coefficient{}, false
}

func cell(v view.Num) string {
	if v.IsNone() {
		return "-"
	}
	return view.Short(float64(v))
}

func pad(s string, n int) string {
	r := []rune(s)
	if len(r) > n {
		return string(r[:n-1]) + "…"
	}
	return s + strings.Repeat(" ", n-len(r))
}

// checkText is the report of `check`.
func checkText(r *view.Results) string {
	var b strings.Builder
	if r.Invented {
		b.WriteString("Invented data: this study shows what the tool does and says nothing about the world.\n")
	}
	for _, l := range wrap(rowsLine(r), "  ") {
		b.WriteString(l + "\n")
	}
	for _, v := range r.Verdict {
		for _, l := range wrap("- "+v, "  ") {
			b.WriteString(l + "\n")
		}
	}
	nameWidth := 12
	for _, g := range r.Diagnosis.Regressors {
		nameWidth = max(nameWidth, min(36, utf8.RuneCountInString(g.Name)))
	}
	fmt.Fprintf(&b, "\n%s  %16s  %23s  %8s  %19s\n", pad("coefficient", nameWidth), "standard error x", "explained by the others", "VIF", "VIF, powers centred")
	for _, g := range r.Diagnosis.Regressors {
		vif := cell(g.VIF)
		if g.VIF.IsNone() {
			vif = "exact"
		}
		centered := cell(g.VIFCentered)
		if g.VIFCentered.IsNone() {
			centered = "exact"
		}
		fmt.Fprintf(&b, "%s  %16s  %23s  %8s  %19s\n", pad(g.Name, nameWidth), cell(g.StandardErrorFactor), percent(g.AuxiliaryR2), vif, centered)
	}
	if len(r.Diagnosis.NearDependencies) > 0 {
		b.WriteString("\nWhat moves together:\n")
		for _, d := range r.Diagnosis.NearDependencies {
			for _, l := range wrap(fmt.Sprintf("  %s  [%s, R² %s]", d.Equation, d.Kind, view.Four(d.R2)), "      ") {
				b.WriteString("  " + l + "\n")
			}
		}
	}
	if len(r.Diagnosis.Reasons) > 0 {
		b.WriteString("\n")
		if r.Diagnosis.Flagged {
			b.WriteString("Flagged:\n")
		} else {
			b.WriteString("Not flagged; remarks:\n")
		}
		for _, reason := range r.Diagnosis.Reasons {
			for _, l := range wrap(reason.Kind+": "+reason.Text, "    ") {
				b.WriteString("  " + l + "\n")
			}
		}
	} else {
		b.WriteString("\nNot flagged.\n")
	}
	for _, n := range r.Notes {
		for _, l := range wrap("Note: "+n.Text, "  ") {
			b.WriteString(l + "\n")
		}
	}
	b.WriteString("\n")
	for _, l := range wrap(caution(r), "  ") {
		b.WriteString(l + "\n")
	}
	return b.String()
}

func percent(share view.Num) string {
	if share.IsNone() {
		return "-"
	}
	return figures.Percent(float64(share))
}

// progress draws a bar on a terminal once a run takes longer than a second; it draws nothing when piped.
type progress struct {
	w     io.Writer
	start time.Time
	drawn bool
	last  time.Time
}

func newProgress(w io.Writer) *progress {
	f, ok := w.(*os.File)
	if !ok {
		return &progress{}
	}
	if info, err := f.Stat(); err != nil || info.Mode()&os.ModeCharDevice == 0 {
		return &progress{}
	}
	return &progress{w: w, start: time.Now()}
}

func (p *progress) step(stage string, done, total int) {
	if p.w == nil || time.Since(p.start) < time.Second || time.Since(p.last) < 100*time.Millisecond {
		return
	}
	p.last, p.drawn = time.Now(), true
	const size = 30
	if total <= 0 {
		fmt.Fprintf(p.w, "\r%-70s", fmt.Sprintf("%d %s", done, stage))
		return
	}
	n := size * done / total
	fmt.Fprintf(p.w, "\r%-70s", fmt.Sprintf("[%s%s] %d of %d %s", strings.Repeat("=", n), strings.Repeat(" ", size-n), done, total, stage))
}

func (p *progress) end() {
	if p.drawn {
		fmt.Fprintf(p.w, "\r%-70s\r", "")
	}
}
