package page

import (
	"fmt"
	"html/template"
	"strings"

	"modelmend/fit/equation"
)

// equationMath sets an equation as MathML, one element a term so that a long one can wrap. A text that is no equation is set as it is.
func equationMath(text string, uncentered bool) template.HTML {
	q, err := equation.Parse(text)
	if err != nil {
		return template.HTML("<span>" + template.HTMLEscapeString(text) + "</span>")
	}
	var b strings.Builder
	chunk := func(inner string) { b.WriteString(`<math display="inline">` + inner + `</math> `) }
	chunk(mathOf(q.Dependent) + "<mo>=</mo>")
	k := 0
	coefficient := func() string {
		s := fmt.Sprintf("<msub><mi>β</mi><mn>%d</mn></msub>", k)
		k++
		return s
	}
	if !uncentered {
		chunk(coefficient() + "<mo>+</mo>")
	} else {
		k = 1
	}
	for _, t := range q.Terms {
		chunk(coefficient() + "<mspace width=\"0.2em\"/>" + mathOf(t) + "<mo>+</mo>")
	}
	chunk("<mi>ε</mi>")
	return template.HTML(b.String())
}

func mathOf(e *equation.Expr) string {
	row := func(parts ...string) string { return "<mrow>" + strings.Join(parts, "") + "</mrow>" }
	esc := template.HTMLEscapeString
	switch e.Kind {
	case equation.Name:
		return "<mtext>" + esc(clip(e.Text, 22)) + "</mtext>"
	case equation.Number:
		return "<mn>" + esc(e.Text) + "</mn>"
	case equation.Product:
		return row(factor(e.Args[0]), "<mo>·</mo>", factor(e.Args[1]))
	case equation.Ratio:
		return "<mfrac>" + mathOf(e.Args[0]) + mathOf(e.Args[1]) + "</mfrac>"
	case equation.Power:
		return "<msup>" + factor(e.Args[0]) + fmt.Sprintf("<mn>%d</mn>", e.Power) + "</msup>"
	case equation.Sum, equation.Difference:
		sign := "<mo>+</mo>"
		if e.Kind == equation.Difference {
			sign = "<mo>−</mo>"
		}
		var parts []string
		for i, a := range e.Args {
			if i > 0 {
				parts = append(parts, sign)
			}
			parts = append(parts, mathOf(a))
		}
		return row(append(append([]string{"<mo>(</mo>"}, parts...), "<mo>)</mo>")...)
	case equation.Negative:
		return row("<mo>−</mo>", factor(e.Args[0]))
	case equation.Call:
		switch e.Text {
		case "sqrt":
			return "<msqrt>" + mathOf(e.Args[0]) + "</msqrt>"
		case "abs":
			return row("<mo>|</mo>", mathOf(e.Args[0]), "<mo>|</mo>")
		case "exp":
			return "<msup><mi>e</mi>" + mathOf(e.Args[0]) + "</msup>"
		case "categories":
			return "<msub>" + mathOf(e.Args[0]) + "<mtext>categories</mtext></msub>"
		}
		inner := mathOf(e.Args[0])
		if !strings.HasPrefix(inner, "<mrow><mo>(") {
			inner = row("<mo>(</mo>", inner, "<mo>)</mo>")
		}
		return row("<mi>"+esc(e.Text)+"</mi>", inner)
	}
	return "<mtext>" + esc(e.String()) + "</mtext>"
}

// clip shortens a name that would stand out of a narrow page; the label of the equation holds it whole.
func clip(s string, n int) string {
	r := []rune(s)
	if len(r) <= n {
		return s
	}
	return string(r[:n-1]) + "…"
}

func factor(e *equation.Expr) string {
	s := mathOf(e)
	if e.Kind == equation.Ratio || e.Kind == equation.Negative {
		return "<mrow><mo>(</mo>" + s + "<mo>)</mo></mrow>"
	}
	return s
}
