// Command bench makes invented tables, deals their folds as modelmend does, and times the bare reading of a file by modelmend's own reader.
//
//	bench make ROWS COLUMNS FILE      an invented table: y, x0, x1, ...; the first five regressors move together
//	bench folds ROWS SEED FILE        the fold of each row, five repeats of ten, as bytes
//	bench parse FILE                  reads the file and adds up every column
package main

import (
	"bufio"
	"fmt"
	"math/rand/v2"
	"os"
	"strconv"
	"time"

	"modelmend/fit/dataset"
	"modelmend/fit/folds"
)

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(args []string) error {
	switch {
	case len(args) == 4 && args[0] == "make":
		n, err := strconv.Atoi(args[1])
		if err != nil {
			return err
		}
		p, err := strconv.Atoi(args[2])
		if err != nil {
			return err
		}
		return table(n, p, args[3])
	case len(args) == 4 && args[0] == "folds":
		n, err := strconv.Atoi(args[1])
		if err != nil {
			return err
		}
		seed, err := strconv.ParseInt(args[2], 10, 64)
		if err != nil {
			return err
		}
		return deal(n, seed, args[3])
	case len(args) == 2 && args[0] == "parse":
		return parse(args[1])
	}
	return fmt.Errorf("usage: bench make ROWS COLUMNS FILE | folds ROWS SEED FILE | parse FILE")
}

func table(n, p int, path string) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	w := bufio.NewWriterSize(f, 1<<20)
	rng := rand.New(rand.NewPCG(1, 2))
	w.WriteString("y")
	for j := range p {
		fmt.Fprintf(w, ",x%d", j)
	}
	w.WriteByte('\n')
	x := make([]float64, p)
	var line []byte
	for range n {
		common, y := rng.NormFloat64(), 3*rng.NormFloat64()
		for j := range x {
			x[j] = rng.NormFloat64()
			if j < 5 {
				x[j] = common + 0.2*x[j]
			}
			y += x[j] * (2*float64(j)/float64(max(1, p-1)) - 1)
		}
		line = strconv.AppendFloat(line[:0], y, 'f', 9, 64)
		for _, v := range x {
			line = append(line, ',')
			line = strconv.AppendFloat(line, v, 'f', 9, 64)
		}
		line = append(line, '\n')
		if _, err := w.Write(line); err != nil {
			return err
		}
	}
	return w.Flush()
}

func deal(n int, seed int64, path string) error {
	plan, err := folds.NewRandom(n, 10, 5, seed, true)
	if err != nil {
		return err
	}
	out := make([]byte, 0, 5*n)
	for r := range 5 {
		for i := range n {
			out = append(out, byte(plan.Of(r, i)))
		}
	}
	return os.WriteFile(path, out, 0o644)
}

func parse(path string) error {
	start := time.Now()
	t, err := dataset.Open(path, nil)
	if err != nil {
		return err
	}
	sum := 0.0
	if err := t.Each(func(piece *dataset.Table) error {
		for _, c := range piece.Columns {
			for _, v := range c.Hi {
				sum += v
			}
		}
		return nil
	}); err != nil {
		return err
	}
	fmt.Printf("%.4f\n", time.Since(start).Seconds())
	_, err = fmt.Fprintln(os.Stderr, "sum", sum)
	return err
}
