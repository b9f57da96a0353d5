package compare_test

import (
	"bufio"
	"context"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"testing"

	"modelmend/compare"
	"modelmend/fit/dataset"
)

// TestTwentyMillionRows passes over 20 million invented rows of twelve regressors in flat memory. It takes a minute or two and a gigabyte of disk:
// .ci/run --long sets MODELMEND_LONG for it.
func TestTwentyMillionRows(t *testing.T) {
	if os.Getenv("MODELMEND_LONG") == "" {
		t.Skip("set MODELMEND_LONG=1 to pass over 20 million rows")
	}
	const rows, p = 20_000_000, 12
	path := filepath.Join(t.TempDir(), "rows.csv")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	w.WriteString("y,x0,x1,x2,x3,x4,x5,x6,x7,x8,x9,x10,x11\n")
	state := uint64(1)
	next := func() int64 {
		state = state*6364136223846793005 + 1442695040888963407
		return int64(state >> 57)
	}
	var line []byte
	for range rows {
		line = line[:0]
		x0, x1 := next(), next()
		y := 3*x0 - x1 + next()
		line = strconv.AppendInt(line, y, 10)
		for j := range p {
			v := next()
			switch j {
			case 0:
				v = x0
			case 1:
				v = x1
			case 2:
				v = 4*x0 + v/16 // nearly a multiple of x0
			}
			line = append(line, ',')
			line = strconv.AppendInt(line, v, 10)
		}
		line = append(line, '\n')
		w.Write(line)
	}
	if err := w.Flush(); err != nil {
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
}
