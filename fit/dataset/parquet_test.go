package dataset

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/parquet-go/parquet-go"

	"modelmend/fit/doubledouble"
)

// wageRow has the columns of the wage survey in the file's order.
type wageRow struct {
	Education  int32   `parquet:"education"`
	South      int64   `parquet:"south"`
	Gender     string  `parquet:"gender,dict"`
	Experience float64 `parquet:"experience"`
	Union      bool    `parquet:"union"`
	Wage       float64 `parquet:"wage"`
	Age        uint32  `parquet:"age"`
	Race       string  `parquet:"race"`
	Occupation string  `parquet:"occupation,zstd"`
	Sector     string  `parquet:"sector,snappy"`
	Married    int32   `parquet:"married"`
}

func writeParquet[T any](t *testing.T, rows []T, options ...parquet.WriterOption) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "t.parquet")
	if err := parquet.WriteFile(path, rows, options...); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestParquetIsTheCSV: the wage survey written as Parquet by the library's own writer gives the columns of the CSV, digit for digit.
func TestParquetIsTheCSV(t *testing.T) {
	csv, err := ReadFile("../../testdata/wages/data.csv")
	if err != nil {
		t.Fatal(err)
	}
	at := func(name string) *Column { c, _ := csv.Column(name); return c }
	text := func(name string, i int) string { c := at(name); return c.Levels[c.Codes[i]] }
	var rows []wageRow
	for i := range csv.Rows {
		rows = append(rows, wageRow{int32(at("education").Hi[i]), int64(at("south").Hi[i]), text("gender", i), at("experience").Hi[i], at("union").Hi[i] == 1, at("wage").Hi[i],
			uint32(at("age").Hi[i]), text("race", i), text("occupation", i), text("sector", i), int32(at("married").Hi[i])})
	}
	got, err := ReadFile(writeParquet(t, rows))
	if err != nil {
		t.Fatal(err)
	}
	if got.Rows != csv.Rows {
		t.Fatalf("%d rows, want %d", got.Rows, csv.Rows)
	}
	for j, want := range csv.Columns {
		c := got.Columns[j]
		if c.Name != want.Name || c.Kind != want.Kind || c.Decimals != want.Decimals || strings.Join(c.Levels, " ") != strings.Join(want.Levels, " ") {
			t.Errorf("column %+v, want %s of kind %d with %d decimals", c.Name, want.Name, want.Kind, want.Decimals)
		}
		for i := range csv.Rows {
			if shownCell(c, i) != shownCell(want, i) {
				t.Fatalf("%s, row %d: %s, want %s", c.Name, i, shownCell(c, i), shownCell(want, i))
			}
		}
	}
	only, err := ReadColumns(writeParquet(t, rows), func(n string) bool { return n == "wage" })
	if err != nil || only.Columns[0].Kind != Skipped || only.Columns[5].Kind != Number {
		t.Errorf("pruned: %v", err)
	}
}

type typedRow struct {
	Price  int64     `parquet:"price,decimal(2:18)"`
	Ratio  *float64  `parquet:"ratio,optional"`
	Note   *string   `parquet:"note,optional"`
	Single float32   `parquet:"single"`
	Big    int64     `parquet:"big"`
	Day    int32     `parquet:"day,date"`
	When   time.Time `parquet:"when,timestamp(millisecond)"`
	None   *int32    `parquet:"none,optional"`
	List   []int32   `parquet:"list,list"`
}

// TestParquetTypes: decimals, missing values, single precision, whole numbers beyond float64, dates. Values by hand.
func TestParquetTypes(t *testing.T) {
	x, s := 0.1, "text"
	when := time.Date(2026, 3, 1, 12, 30, 0, 0, time.UTC)
	path := writeParquet(t, []typedRow{
		{12345, &x, nil, 0.1, 9007199254740993, 0, when, nil, []int32{1}},
		{-5, nil, &s, 2.5, -1, 20513, when.Add(-time.Millisecond), nil, nil},
	})
	tb, err := ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	want := map[string][2]string{
		"price": {"123.45 -2.8421709430404008e-15", "-0.05 -2.7755575615628915e-18"}, "ratio": {"0.1 -5.551115123125783e-18", "NaN 0"}, "note": {"missing", "text"},
		"single": {"0.1 -5.551115123125783e-18", "2.5 0"}, "big": {"9.007199254740992e+15 1", "-1 0"}, "day": {"1970-01-01", "2026-03-01"},
		"when": {"2026-03-01T12:30:00Z", "2026-03-01T12:29:59.999Z"}, "none": {"nothing", "nothing"}, "list": {"nothing", "nothing"},
	}
	for _, c := range tb.Columns {
		w, ok := want[c.Name]
		for i := range w {
			if got := shownCell(c, i); !ok || got != w[i] {
				if c.Name == "price" && strings.HasPrefix(got, strings.Fields(w[i])[0]+" ") {
					// the low part is checked against the same decimal read as text
					plain, _ := Read(strings.NewReader("a,b\n123.45,x\n-0.05,x\n"), "t.csv")
					if got == shownCell(plain.Columns[0], i) {
						continue
					}
				}
				t.Errorf("%s, row %d: %q, want %q", c.Name, i, got, w[i])
			}
		}
	}
	if c, _ := tb.Column("price"); c.Decimals != 2 {
		t.Errorf("price has %d decimals", c.Decimals)
	}
	_, err = ReadColumns(path, func(n string) bool { return n == "list" })
	var f *FileError
	if !errors.As(err, &f) || !strings.Contains(err.Error(), "lists or records") {
		t.Errorf("a list column that is asked for: %v", err)
	}
}

// TestParquetWholes: whole numbers on each side of what a float64 holds are those of the same digits in a CSV file.
func TestParquetWholes(t *testing.T) {
	type row struct {
		Signed   int64  `parquet:"signed"`
		Unsigned uint64 `parquet:"unsigned"`
	}
	var rows []row
	text := "signed,unsigned\n"
	for _, r := range []row{{1<<53 - 1, 1 << 53}, {1 << 53, 1<<53 + 1}, {1<<53 + 1, 1<<63 + 1}, {-1 << 53, 1<<64 - 1}, {-1<<53 - 1, 0}, {math.MinInt64, 1<<63 - 1}, {math.MaxInt64, 1 << 63}} {
		rows = append(rows, r)
		text += fmt.Sprintf("%d,%d\n", r.Signed, r.Unsigned)
	}
	want, err := Read(strings.NewReader(text), "t.csv")
	if err != nil {
		t.Fatal(err)
	}
	got, err := ReadFile(writeParquet(t, rows))
	if err != nil {
		t.Fatal(err)
	}
	for j, c := range want.Columns {
		for i := range rows {
			if g, w := shownCell(got.Columns[j], i), shownCell(c, i); g != w {
				t.Errorf("%s, row %d: %s, want %s", c.Name, i, g, w)
			}
		}
	}
}

// TestParquetStreamed: row groups, pages and pieces of any size give the rows, kinds, levels and counts of the table held.
func TestParquetStreamed(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 9))
	rows := make([]typedRow, 700)
	for i := range rows {
		r := &rows[i]
		*r = typedRow{Price: rng.Int64N(1e6), Single: float32(rng.IntN(100)) / 8, Big: int64(rng.Uint64()), Day: int32(rng.IntN(40)), When: time.Unix(rng.Int64N(1e9), 0)}
		if x := rng.NormFloat64(); i > 300 && rng.IntN(5) > 0 {
			r.Ratio = &x
		}
		if s := []string{"north", "south", "", "NA", "7"}[rng.IntN(5)]; rng.IntN(4) > 0 {
			r.Note = &s
		}
	}
	for _, group := range []int64{1 << 20, 97} {
		path := writeParquet(t, rows, parquet.MaxRowsPerRowGroup(group), parquet.PageBufferSize(300))
		for _, need := range []func(string) bool{nil, func(n string) bool { return n != "price" && n != "note" && n != "list" }} {
			whole, err := ReadColumns(path, need)
			if err != nil {
				t.Fatal(err)
			}
			for _, size := range []int{1, 999, 1 << 20} {
				tb, err := OpenInPieces(path, need, size)
				if err != nil {
					t.Fatal(err)
				}
				sameStreamed(t, fmt.Sprintf("groups of %d, pieces of %d", group, size), tb, whole)
				if want := hashOf(t, path); tb.Hash != want || whole.Hash != want {
					t.Errorf("hash %s, held %s, want %s", tb.Hash, whole.Hash, want)
				}
			}
		}
	}
	_, err := OpenInPieces(writeParquet(t, rows), func(n string) bool { return n == "list" }, 100)
	if err == nil || !strings.Contains(err.Error(), "lists or records") {
		t.Errorf("a list column that is asked for: %v", err)
	}
	if _, err := OpenInPieces(writeParquet(t, rows[:0]), nil, 100); err == nil || !strings.Contains(err.Error(), "no rows") {
		t.Errorf("no rows: %v", err)
	}
}

// TestParquetReplaced: a file that becomes another between two passes is refused.
func TestParquetReplaced(t *testing.T) {
	path := writeParquet(t, make([]typedRow, 50))
	tb, err := OpenInPieces(path, nil, 100)
	if err != nil {
		t.Fatal(err)
	}
	if err := parquet.WriteFile(path, make([]wageRow, 50)); err != nil {
		t.Fatal(err)
	}
	if err := tb.Each(func(*Table) error { return nil }); err == nil || !strings.Contains(err.Error(), "other columns than before") {
		t.Errorf("another file gives %v", err)
	}
}

// TestFewDigits: the short way to the decimal of a float64 gives what the shortest decimal of the standard library gives.
func TestFewDigits(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	values := []float64{0.1, 0.5, -0.05, 1e-15, 1.5e-10, 1e-16, 1e-300, 5e-324, 1.1e15, 123456789012345.6, 0.999999999999999, 0.9999999999999999, 0.30000000000000004,
		999999999999999.9, 99999999999999.9, 1e22 + 0.1, 4503599627370495.5}
	for range 200_000 {
		digits := 1 + rng.IntN(17)
		v, err := strconv.ParseFloat(fmt.Sprintf("%d.%0*d", rng.IntN(1000), digits, rng.Int64N(int64(math.Pow10(digits)))), 64)
		if err != nil {
			t.Fatal(err)
		}
		values = append(values, v, -v, v*math.Pow10(-rng.IntN(20)), rng.NormFloat64())
	}
	found := 0
	for _, v := range values {
		if v == math.Trunc(v) {
			continue
		}
		got, decimals, ok := fewDigits(v, 0)
		if !ok {
			continue
		}
		found++
		text := strconv.FormatFloat(v, 'f', -1, 64)
		want, err := doubledouble.Parse(text)
		if err != nil {
			t.Fatal(err)
		}
		if places := len(text) - strings.IndexByte(text, '.') - 1; got != want || decimals != places {
			t.Fatalf("%s: %v with %d decimals, want %v with %d", text, got, decimals, want, places)
		}
	}
	if found < len(values)/3 {
		t.Errorf("only %d of %d values taken the short way", found, len(values))
	}
}

// TestParquetDamaged: cut and scrambled files are named, whatever the library does with them.
func TestParquetDamaged(t *testing.T) {
	x := 0.1
	raw, err := os.ReadFile(writeParquet(t, []typedRow{{1, &x, nil, 1, 1, 1, time.Unix(0, 0), nil, nil}}))
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "bad.parquet")
	for n := 0; n < len(raw); n += 7 {
		scrambled := append([]byte(nil), raw...)
		scrambled[n] ^= 0x5a
		for _, content := range [][]byte{raw[:n], scrambled} {
			if err := os.WriteFile(path, content, 0o600); err != nil {
				t.Fatal(err)
			}
			_, held := ReadFile(path)
			tb, streamed := OpenInPieces(path, nil, 50)
			if streamed == nil {
				streamed = tb.Each(func(*Table) error { return nil })
			}
			if (held == nil) != (streamed == nil) {
				t.Errorf("byte %d: held %v, streamed %v", n, held, streamed)
			}
			for _, err := range []error{held, streamed} {
				var f *FileError
				if err != nil && !errors.As(err, &f) {
					t.Fatalf("byte %d: %v is not a *FileError", n, err)
				}
			}
		}
	}
}
