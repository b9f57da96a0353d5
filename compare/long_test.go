package compare_test

import (
	"bufio"
	"compress/gzip"
	"context"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"testing"

	"github.com/klauspost/compress/zstd"
	"github.com/parquet-go/parquet-go"

	"modelmend/compare"
	"modelmend/fit/dataset"
)

type longRow struct {
	Y   int64 `parquet:"y"`
	X0  int64 `parquet:"x0"`
	X1  int64 `parquet:"x1"`
	X2  int64 `parquet:"x2"`
	X3  int64 `parquet:"x3"`
	X4  int64 `parquet:"x4"`
	X5  int64 `parquet:"x5"`
	X6  int64 `parquet:"x6"`
	X7  int64 `parquet:"x7"`
	X8  int64 `parquet:"x8"`
	X9  int64 `parquet:"x9"`
	X10 int64 `parquet:"x10"`
	X11 int64 `parquet:"x11"`
}

// inventRows gives invented rows: y and twelve regressors, the third nearly a multiple of the first.
func inventRows(rows int, give func(longRow) error) error {
	state := uint64(1)
	next := func() int64 {
		state = state*6364136223846793005 + 1442695040888963407
		return int64(state >> 57)
	}
	for range rows {
		x0, x1 := next(), next()
		r := longRow{3*x0 - x1 + next(), x0, x1, 4*x0 + next()/16, next(), next(), next(), next(), next(), next(), next(), next(), next()}
		if err := give(r); err != nil {
			return err
		}
	}
	return nil
}

func inventText(rows int, to io.Writer) error {
	w := bufio.NewWriterSize(to, 1<<20)
	w.WriteString("y,x0,x1,x2,x3,x4,x5,x6,x7,x8,x9,x10,x11\n")
	var line []byte
	err := inventRows(rows, func(r longRow) error {
		line = line[:0]
		for _, v := range []int64{r.Y, r.X0, r.X1, r.X2, r.X3, r.X4, r.X5, r.X6, r.X7, r.X8, r.X9, r.X10, r.X11} {
			line = append(strconv.AppendInt(line, v, 10), ',')
		}
		line[len(line)-1] = '\n'
		_, err := w.Write(line)
		return err
	})
	if err != nil {
		return err
	}
	return w.Flush()
}

// TestTwentyMillionRows passes over 20 million invented rows of twelve regressors in flat memory, plain, compressed and as Parquet. It takes some
// minutes and a gigabyte of disk: .ci/run --long sets MODELMEND_LONG for it.
func TestTwentyMillionRows(t *testing.T) {
	if os.Getenv("MODELMEND_LONG") == "" {
		t.Skip("set MODELMEND_LONG=1 to pass over 20 million rows")
	}
	const rows = 20_000_000
	for _, form := range []struct {
		ending string
		write  func(f *os.File) error
	}{
		{".csv", func(f *os.File) error { return inventText(rows, f) }},
		{".csv.gz", func(f *os.File) error {
			w, err := gzip.NewWriterLevel(f, gzip.BestSpeed)
			if err != nil {
				return err
			}
			if err := inventText(rows, w); err != nil {
				return err
			}
			return w.Close()
		}},
		{".csv.zst", func(f *os.File) error {
			w, err := zstd.NewWriter(f, zstd.WithEncoderConcurrency(1))
			if err != nil {
				return err
			}
			if err := inventText(rows, w); err != nil {
				return err
			}
			return w.Close()
		}},
		{".parquet", func(f *os.File) error {
			w := parquet.NewGenericWriter[longRow](f, parquet.MaxRowsPerRowGroup(100_000))
			batch := make([]longRow, 0, 1000)
			err := inventRows(rows, func(r longRow) (err error) {
				if batch = append(batch, r); len(batch) == cap(batch) {
					_, err = w.Write(batch)
					batch = batch[:0]
				}
				return err
			})
			if err != nil {
				return err
			}
			return w.Close()
		}},
	} {
		t.Run(form.ending, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "rows"+form.ending)
			f, err := os.Create(path)
			if err != nil {
				t.Fatal(err)
			}
			if err := form.write(f); err != nil {
				t.Fatal(err)
			}
			if err := f.Close(); err != nil {
				t.Fatal(err)
			}
			table, err := dataset.Open(path, nil)
			if err != nil {
				t.Fatal(err)
			}
			if !table.Streamed() {
				t.Fatal("the table is held")
			}
			c, err := compare.Run(context.Background(), table, newStudy("y = x0 + x1 + x2 + x3 + x4 + x5 + x6 + x7 + x8 + x9 + x10 + x11"), compare.Options{})
			if err != nil {
				t.Fatal(err)
			}
			if c.Design.Rows != rows {
				t.Errorf("%d rows", c.Design.Rows)
			}
			// By construction: the coefficients of x1 and of x3 are -1 and 0.
			if k := coefficient(t, find(t, c, "as-is"), "x1"); k.Estimate < -1.01 || k.Estimate > -0.99 {
				t.Errorf("x1: %v", k.Estimate)
			}
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			t.Logf("memory asked of the system: %d MB", m.Sys>>20)
			if m.Sys > 160<<20 {
				t.Errorf("%d MB of memory for 20 million rows", m.Sys>>20)
			}
		})
	}
}
