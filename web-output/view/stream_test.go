package view_test

import (
	"bytes"
	"compress/gzip"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"
	"github.com/parquet-go/parquet-go"

	"modelmend/compare"
	"modelmend/fit/dataset"
	"modelmend/web-output/view"
)

// large is an invented table of more rows than are dealt one by one: a near copy, a square, a product, an exact identity among decimals,
// a category with a level that the sample leaves out and one with few rows, gaps, and values without a logarithm.
func large(t *testing.T) string {
	t.Helper()
	var b strings.Builder
	b.WriteString("y,a,b,c,d,total,place,note\n")
	state := uint64(77)
	next := func() float64 {
		state = state*6364136223846793005 + 1442695040888963407
		return float64(state>>40) / float64(1<<24)
	}
	for i := range 13000 {
		a, c, d := 10*next(), next(), next()
		near := a + 0.2*next()
		whole, part := float64(int(100*next()))/10, float64(int(300*next()))/10
		place := []string{"east", "north", "south", "west"}[int(4*next())]
		if i%2600 == 1 {
			place = "islet"
		}
		if i%1000 == 3 {
			place = "gone"
		}
		cells := []string{num(3 + 0.5*a - 0.2*near + c*d + next()), num(a), num(near), num(c), fmt.Sprintf("%.1f", whole), fmt.Sprintf("%.1f", whole+part), place, "x"}
		if i%97 == 5 {
			cells[3] = "NA"
		}
		if i%211 == 7 {
			cells[0] = "-1"
		}
		b.WriteString(strings.Join(cells, ",") + "\n")
	}
	path := filepath.Join(t.TempDir(), "large.csv")
	if err := os.WriteFile(path, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// packed writes the table again, as .gz and as .zst.
func packed(t *testing.T, path string) (gz, zst string) {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	gz, zst = path+".gz", path+".zst"
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	w.Write(text)
	w.Close()
	if err := os.WriteFile(gz, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	z, err := zstd.NewWriter(nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(zst, z.EncodeAll(text, nil), 0o600); err != nil {
		t.Fatal(err)
	}
	return gz, zst
}

// asParquet writes the table as Parquet, in several row groups.
func asParquet(t *testing.T, path string) string {
	t.Helper()
	type row struct {
		Y     float64  `parquet:"y"`
		A     float64  `parquet:"a"`
		B     float64  `parquet:"b"`
		C     *float64 `parquet:"c,optional"`
		D     float32  `parquet:"d"`
		Total int64    `parquet:"total,decimal(1:18)"`
		Place string   `parquet:"place,dict"`
		Note  string   `parquet:"note"`
	}
	table, err := dataset.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	rows := make([]row, table.Rows)
	for i := range rows {
		at := func(name string) float64 { c, _ := table.Column(name); return c.Hi[i] }
		place, _ := table.Column("place")
		rows[i] = row{Y: at("y"), A: at("a"), B: at("b"), D: float32(at("d")), Total: int64(math.Round(10 * at("total"))), Place: place.Levels[place.Codes[i]], Note: "x"}
		if c := at("c"); !math.IsNaN(c) {
			rows[i].C = &c
		}
	}
	path = strings.TrimSuffix(path, ".csv") + ".parquet"
	if err := parquet.WriteFile(path, rows, parquet.MaxRowsPerRowGroup(5000), parquet.PageBufferSize(4000)); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestStreamedIsHeld: a table passed over piece by piece gives the same bytes as the table held in memory, for any number of workers, and a compressed
// table the same as a plain one.
func TestStreamedIsHeld(t *testing.T) {
	path := large(t)
	gz, zst := packed(t, path)
	columns := asParquet(t, path)
	for name, edit := range map[string]func(*compare.Study){
		"numbers": func(s *compare.Study) { s.Equation = "y = a + b + c + d" },
		"everything": func(s *compare.Study) {
			s.Equation = "ln(y) = a + b + a^2 + a*c + c + d + place"
			s.Rows = "place != 'gone'"
			s.Focal = []string{"a"}
		},
		"identity": func(s *compare.Study) { s.Equation = "y = c + d + total + (total-d)" },
		"no constant": func(s *compare.Study) {
			s.Equation = "y = a + b + c"
			s.NoConstant = true
		},
		"named base": func(s *compare.Study) { s.Equation = `y = a + b + categories(place, "west")`; s.ShowSmallCells = true },
		"few rows":   func(s *compare.Study) { s.Equation = "y = a + b + c"; s.Rows = "a < 5" },
		"fold column": func(s *compare.Study) {
			s.Equation = "y = a + b"
			s.Folds = compare.FoldSpec{Kind: "column", Columns: []string{"place"}}
		},
	} {
		t.Run(name, func(t *testing.T) {
			run := func(table *dataset.Table, err error, workers int) []byte {
				t.Helper()
				if err != nil {
					t.Fatal(err)
				}
				s := study("")
				edit(s)
				c, err := compare.Run(context.Background(), table, s, compare.Options{Workers: workers})
				if err != nil {
					t.Fatal(err)
				}
				b, err := json.MarshalIndent(view.Build(c, "", "test"), "", " ")
				if err != nil {
					t.Fatal(err)
				}
				return bytes.Replace(b, []byte(c.Table.Hash), []byte("HASH"), 1)
			}
			held, err := dataset.ReadFile(path)
			csv := run(held, err, 2)
			held, err = dataset.ReadFile(columns)
			parquet := run(held, err, 2)
			for _, c := range []struct {
				path          string
				size, workers int
				want          []byte
			}{{path, 20000, 1, csv}, {path, 70001, 3, csv}, {gz, 50000, 2, csv}, {zst, 50000, 2, csv}, {columns, 50000, 2, parquet}} {
				table, err := dataset.OpenInPieces(c.path, nil, c.size)
				if err == nil && !table.Streamed() {
					t.Fatal("the table is held")
				}
				got, want := run(table, err, c.workers), c.want
				if !bytes.Equal(got, want) {
					g, w := strings.Split(string(got), "\n"), strings.Split(string(want), "\n")
					shown := 0
					for i := range min(len(g), len(w)) {
						if g[i] != w[i] && shown < 6 {
							t.Errorf("%s in pieces of %d: line %d is %s, held %s", filepath.Base(c.path), c.size, i, g[i], w[i])
							shown++
						}
					}
					if shown == 0 {
						t.Errorf("%s in pieces of %d: %d lines, held %d", filepath.Base(c.path), c.size, len(g), len(w))
					}
				}
			}
		})
	}
}

// TestStreamedRefusals: what is wrong with a streamed table is said as for one that is held.
func TestStreamedRefusals(t *testing.T) {
	path := large(t)
	gz, zst := packed(t, path)
	columns := asParquet(t, path)
	for _, eq := range []string{"y = a + nothing", "y = a*place", "y = a + note", "y = a + (d-d)", "(d-d) = a", `y = a + categories(place, "nowhere")`} {
		said := func(table *dataset.Table, err error) string {
			t.Helper()
			if err != nil {
				t.Fatal(err)
			}
			_, err = compare.Run(context.Background(), table, study(eq), compare.Options{})
			if err == nil {
				t.Fatalf("%s was accepted", eq)
			}
			return err.Error()
		}
		for _, path := range []string{path, gz, zst, columns} {
			held, err := dataset.ReadFile(path)
			want := said(held, err)
			table, err := dataset.OpenInPieces(path, nil, 30000)
			if got := said(table, err); got != want {
				t.Errorf("%s: streamed\n%s\nheld\n%s", eq, got, want)
			}
		}
	}
}
