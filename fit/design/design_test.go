package design_test

import (
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"

	"modelmend/fit/dataset"
	"modelmend/fit/design"
	"modelmend/fit/equation"
)

const flats = `rent,area,rooms,district,year,note
900,50,2,North,1990,a
1100,NA,3,North,1991,b
0,70,3,South,1992,c
1300,80,4,South,1993,d
1250,75,,East,1994,e
990,55,2,East,1995,f
1010,58,3,North,1996,g
`

func build(t *testing.T, csv, eq string, opt design.Options) (*design.Design, error) {
	t.Helper()
	table, err := dataset.Read(strings.NewReader(csv), "flats.csv")
	if err != nil {
		t.Fatal(err)
	}
	q, err := equation.Parse(eq)
	if err != nil {
		t.Fatal(err)
	}
	return design.Build(table, q, opt)
}

func must(t *testing.T, csv, eq string, opt design.Options) *design.Design {
	t.Helper()
	d, err := build(t, csv, eq, opt)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// counted is what was set aside as a reader sees it.
func counted(d *design.Design) (out []design.SetAside) {
	for _, s := range d.SetAside {
		out = append(out, design.SetAside{Reason: s.Reason, Column: s.Column, Count: s.Count})
	}
	return out
}

func TestRowsSetAsideByReasonAndColumn(t *testing.T) {
	d := must(t, flats, "ln(rent) = area + rooms + district", design.Options{ShowSmallCells: true})
	want := []design.SetAside{{Reason: "missing value", Column: "area", Count: 1}, {Reason: "missing value", Column: "rooms", Count: 1}, {Reason: "ln of a value that is not positive", Column: "rent", Count: 1}}
	if got := counted(d); !reflect.DeepEqual(got, want) {
		t.Errorf("set aside %+v, want %+v", got, want)
	}
	if d.Rows != 4 || d.Read != 7 || !reflect.DeepEqual(d.Lines, []int{2, 5, 7, 8}) {
		t.Errorf("rows %d of %d, lines %v", d.Rows, d.Read, d.Lines)
	}
	if got := d.Names(); !reflect.DeepEqual(got, []string{"area", "rooms", "district=North", "district=South"}) {
		t.Errorf("regressors %v", got)
	}
	// District's base is the first level in byte order; a column that the equation does not use never sets a row aside.
	if got := d.Regressors[2].Values.Hi; !reflect.DeepEqual(got, []float64{1, 0, 0, 1}) {
		t.Errorf("district=North is %v", got)
	}
	if math.Abs(d.Y.Hi[0]-math.Log(900)) > 1e-15 {
		t.Errorf("ln(900) is %v", d.Y.Hi[0])
	}
}

func TestSampleCondition(t *testing.T) {
	cond, err := equation.ParseCondition("year >= 1992 and area < 100")
	if err != nil {
		t.Fatal(err)
	}
	d := must(t, flats, "rent = area", design.Options{Rows: cond})
	want := []design.SetAside{{Reason: "outside the sample", Count: 2}}
	if !reflect.DeepEqual(counted(d), want) || d.Rows != 5 {
		t.Errorf("rows %d, set aside %+v", d.Rows, d.SetAside)
	}
}

func TestSmallCellsAreNotNamed(t *testing.T) {
	d := must(t, flats, "rent = area + district", design.Options{})
	if got := d.Names(); !reflect.DeepEqual(got, []string{"area", "district=(small level 1)", "district=(small level 2)"}) {
		t.Errorf("regressors %v", got)
	}
	found := false
	for _, n := range d.Notes {
		found = found || n.Code == "small-cells"
	}
	if !found {
		t.Error("no note says so")
	}
}

func TestTermsPowersAndFactors(t *testing.T) {
	d := must(t, flats, `rent = area + rooms + area^2 + area*rooms + ln(area) + area/rooms + 20*year`, design.Options{})
	kinds := map[string]design.Kind{"area": design.Number, "area^2": design.Power, "area*rooms": design.Product, "ln(area)": design.Function, "area/rooms": design.Ratio, "20*year": design.Function}
	for _, r := range d.Regressors {
		if want, ok := kinds[r.Name]; ok && r.Kind != want {
			t.Errorf("%s is a %s, want %s", r.Name, r.Kind, want)
		}
	}
	if !reflect.DeepEqual(d.Regressors[3].Factors, []design.Factor{{Atom: "area", Power: 1}, {Atom: "rooms", Power: 1}}) {
		t.Errorf("factors of area*rooms: %v", d.Regressors[3].Factors)
	}
	if len(d.Terms) != 2 || len(d.Terms[0].Columns) != 6 || d.Terms[1].Name != "20*year" {
		t.Errorf("term groups %+v", d.Terms)
	}
}

// TestEffect: derivatives by hand at the means (area 3, rooms 2): d/darea of area + area^2 + area*rooms + ln(area) is
// 1, 2*3, 2, 1/3.
func TestEffect(t *testing.T) {
	d := must(t, "y,area,rooms\n1,2,1\n2,3,2\n4,4,3\n3,3,2\n", "y = area + rooms + area^2 + area*rooms + ln(area)", design.Options{})
	w, ok := d.Effect("area")
	want := []float64{1, 0, 6, 2, 1.0 / 3}
	if !ok {
		t.Fatal("area enters several terms")
	}
	for j := range want {
		if math.Abs(w[j]-want[j]) > 1e-12 {
			t.Errorf("weight %d is %v, want %v", j, w[j], want[j])
		}
	}
	if _, ok := must(t, flats, "rent = area + rooms", design.Options{}).Effect("area"); ok {
		t.Error("area enters one term only")
	}
}

// TestDigitsSurvive: 0.1^3 is 0.001 in decimals; the float64 nearest to 0.001 is too large by 2.0816681711721685e-20 (its exact value is
// 0.001000000000000000020816681711721685...), so the low part must be the negative of that.
func TestDigitsSurvive(t *testing.T) {
	d := must(t, "y,x\n1,0.1\n2,0.2\n4,0.3\n", "y = x^3", design.Options{})
	c := d.Regressors[0].Values
	if c.Lo == nil || c.Hi[0] != 0.001 || math.Abs(c.Lo[0]+2.0816681711721685e-20) > 1e-33 {
		t.Errorf("0.1^3 is %v + %v", c.Hi[0], c.Lo)
	}
}

func TestRefusals(t *testing.T) {
	for _, c := range []struct{ name, csv, eq, want string }{
		{"unknown column", flats, "rent = arae", `did you mean "area"`},
		{"text in arithmetic", flats, "rent = area*district", "products of categories"},
		{"constant column", "y,x\n1,5\n2,5\n3,5\n", "y = x", "the same in all 3 rows"},
		{"constant dependent", "y,x\n1,5\n1,6\n1,7\n", "y = x", "nothing to explain"},
		{"no rows", "y,x\n1,NA\nNA,6\n", "y = x", "none of the 2 rows"},
		{"one level", "y,x,g\n1,2,a\n2,3,a\n3,5,a\n", "y = x + g", "at least two levels"},
		{"bad base", flats, `rent = area + categories(district, "West")`, "its levels are"},
		{"stray word", "y,x\n1,2\n2,3\n3,n/k\n4,5\n5,6\n6,7\n", "y = x", `"n/k" is not a number`},
		{"two rows", "y,x\n1,2\n2,3\n", "y = x", "at least 3"},
		{"empty column", "y,x\n1,\n2,NA\n3,\n", "y = x", "no value in any row"},
	} {
		_, err := build(t, c.csv, c.eq, design.Options{})
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want it to say %q", c.name, err, c.want)
		}
	}
	_, err := build(t, flats, "rent = area + roms", design.Options{})
	var u *design.UnknownColumnError
	if !errors.As(err, &u) || u.Pos != len("rent = area + ") {
		t.Errorf("place of the unknown column: %v", err)
	}
}

func TestNotes(t *testing.T) {
	codes := func(d *design.Design) (out []string) {
		for _, n := range d.Notes {
			out = append(out, n.Code)
		}
		return out
	}
	if got := codes(must(t, flats, "rent = area*rooms", design.Options{})); !reflect.DeepEqual(got, []string{"lower-order-missing", "lower-order-missing", "folds-ignore-time"}) {
		t.Errorf("notes %v", got)
	}
}
