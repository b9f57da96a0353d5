package dataset

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"math/big"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
)

func isParquet(path string) bool { return strings.EqualFold(filepath.Ext(path), ".parquet") }

// readParquet reads the columns that need accepts from a Parquet file: numbers of every width, decimals with every digit, truth values as 0 and 1, text, and
// dates as text in ISO form. Nested and repeated columns are refused when they are asked for.
func readParquet(f *os.File, path string, need func(name string) bool) (t *Table, err error) {
	defer func() {
		// The library's answer to a damaged file can be a panic.
		if r := recover(); r != nil {
			t, err = nil, damaged(path, "Parquet", fmt.Errorf("%v", r))
		}
	}()
	info, err := f.Stat()
	if err != nil {
		return nil, openError(path, err)
	}
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return nil, openError(path, err)
	}
	file, err := parquet.OpenFile(f, info.Size(), parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true))
	if err != nil {
		return nil, damaged(path, "Parquet", err)
	}
	t = &Table{Name: path, Delimiter: ",", Hash: hex.EncodeToString(sum.Sum(nil)), Rows: int(file.NumRows())}
	if t.Rows == 0 {
		return nil, &FileError{Path: path, Reason: HeaderOnly, Found: "column names and no rows", Advice: "give a file with rows"}
	}
	seen := map[string]bool{}
	for _, field := range file.Schema().Fields() {
		name := field.Name()
		if strings.TrimSpace(name) == "" || seen[name] {
			return nil, &FileError{Path: path, Reason: OtherFormat, Found: fmt.Sprintf("a column named %s, empty or for a second time", figures.Quoted(name)), Advice: "give every column a name of its own"}
		}
		seen[name] = true
		c := &Column{Name: name, Kind: Skipped}
		t.Columns = append(t.Columns, c)
		if need != nil && !need(name) {
			continue
		}
		if !field.Leaf() || field.Repeated() {
			if need == nil {
				continue // nobody asked for it by name
			}
			return nil, &FileError{Path: path, Reason: OtherFormat, Found: fmt.Sprintf("the column %s, which holds lists or records", figures.Quoted(name)), Advice: "unfold it into plain columns first"}
		}
		if err := parquetColumn(file, field, t.Rows, c); err != nil {
			return nil, damaged(path, "Parquet", fmt.Errorf("column %s: %w", name, err))
		}
	}
	t.Lines = make([]int, t.Rows)
	for i := range t.Lines {
		t.Lines[i] = i + 1 // there are no lines: rows are counted
	}
	return t, nil
}

// parquetColumn reads one column of all row groups.
func parquetColumn(file *parquet.File, field parquet.Field, rows int, c *Column) error {
	leaf, ok := file.Schema().Lookup(field.Name())
	if !ok {
		return errors.New("it is not in the schema")
	}
	number, text := parquetReader(field, c)
	b := &builder{column: c, delimiter: ',', capacity: rows}
	c.Kind = 0
	if text != nil {
		b.texts = 1
		b.startCodes()
	}
	values := make([]parquet.Value, 4096)
	for _, group := range file.RowGroups() {
		pages := group.ColumnChunks()[leaf.ColumnIndex].Pages()
		err := eachValue(pages, values, func(v parquet.Value) {
			switch {
			case v.IsNull():
				b.add(cell{}, 0)
			case text != nil:
				b.code(text(v))
				b.rows++
			default:
				x := number(v)
				if math.IsNaN(x.Hi) {
					b.add(cell{}, 0)
					return
				}
				b.column.NumericCells++
				b.makeRoom()
				b.store(x.Hi, x.Lo)
				b.rows++
			}
		})
		if cerr := pages.Close(); err == nil {
			err = cerr
		}
		if err != nil {
			return err
		}
	}
	if b.rows != rows {
		return fmt.Errorf("%d values for %d rows", b.rows, rows)
	}
	decimals := c.Decimals
	if text != nil && len(c.Levels) == 0 {
		b.texts = 0
		c.Codes = nil
	}
	b.finish()
	if c.Kind == Number {
		c.Decimals = decimals
	}
	return nil
}

func eachValue(pages parquet.Pages, buf []parquet.Value, f func(parquet.Value)) error {
	for {
		page, err := pages.ReadPage()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		reader := page.Values()
		for {
			n, err := reader.ReadValues(buf)
			for _, v := range buf[:n] {
				f(v)
			}
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				return err
			}
		}
		parquet.Release(page)
	}
}

// parquetReader says how a column's values are read, as numbers or as text, and how many decimals they have.
func parquetReader(field parquet.Field, c *Column) (number func(parquet.Value) doubledouble.Number, text func(parquet.Value) string) {
	var logical format.LogicalType
	if l := field.Type().LogicalType(); l != nil {
		logical = *l
	}
	kind := field.Type().Kind()
	switch {
	case logical.Decimal != nil:
		scale := int(logical.Decimal.Scale)
		c.Decimals = max(0, scale)
		return func(v parquet.Value) doubledouble.Number { return decimalValue(v, kind, scale) }, nil
	case logical.Date != nil:
		return nil, func(v parquet.Value) string {
			return time.Unix(int64(v.Int32())*86400, 0).UTC().Format(time.DateOnly)
		}
	case logical.Timestamp != nil:
		unit := time.Nanosecond
		if logical.Timestamp.Unit.Millis != nil {
			unit = time.Millisecond
		} else if logical.Timestamp.Unit.Micros != nil {
			unit = time.Microsecond
		}
		perSecond := int64(time.Second / unit)
		return nil, func(v parquet.Value) string {
			n := v.Int64()
			s := n / perSecond
			if n%perSecond < 0 {
				s--
			}
			return time.Unix(s, (n-s*perSecond)*int64(unit)).UTC().Format(time.RFC3339Nano)
		}
	}
	unsigned := logical.Integer != nil && !logical.Integer.IsSigned
	switch kind {
	case parquet.Boolean:
		return func(v parquet.Value) doubledouble.Number {
			if v.Boolean() {
				return doubledouble.From(1)
			}
			return doubledouble.Number{}
		}, nil
	case parquet.Int32:
		return func(v parquet.Value) doubledouble.Number {
			if unsigned {
				return doubledouble.From(float64(v.Uint32()))
			}
			return doubledouble.From(float64(v.Int32()))
		}, nil
	case parquet.Int64:
		return func(v parquet.Value) doubledouble.Number {
			if unsigned {
				return whole(new(big.Int).SetUint64(v.Uint64()))
			}
			return whole(big.NewInt(v.Int64()))
		}, nil
	case parquet.Float:
		c.Decimals = -1
		return func(v parquet.Value) doubledouble.Number {
			// The shortest decimal that the 32 bits stand for is what was meant.
			x, err := doubledouble.Parse(strconv.FormatFloat(float64(v.Float()), 'g', -1, 32))
			if err != nil {
				return doubledouble.From(float64(v.Float()))
			}
			return x
		}, nil
	case parquet.Double:
		return func(v parquet.Value) doubledouble.Number { return doubleValue(v.Double(), c) }, nil
	}
	return nil, func(v parquet.Value) string { return string(v.ByteArray()) }
}

// doubleValue takes a 64-bit number for the decimal it was written as, with the digits beyond float64 that this decimal has.
func doubleValue(v float64, c *Column) doubledouble.Number {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return doubledouble.From(math.NaN())
	}
	if v == math.Trunc(v) && math.Abs(v) < 1<<53 {
		return doubledouble.From(v)
	}
	s := strconv.FormatFloat(v, 'e', -1, 64)
	e := strings.IndexByte(s, 'e')
	exponent, err := strconv.Atoi(s[e+1:])
	if err != nil {
		return doubledouble.From(v)
	}
	if point := strings.IndexByte(s, '.'); point >= 0 {
		c.Decimals = max(c.Decimals, e-point-1-exponent)
	} else {
		c.Decimals = max(c.Decimals, -exponent)
	}
	x, err := doubledouble.Parse(s)
	if err != nil {
		return doubledouble.From(v)
	}
	return x
}

func decimalValue(v parquet.Value, kind parquet.Kind, scale int) doubledouble.Number {
	n := new(big.Int)
	switch kind {
	case parquet.Int32:
		n.SetInt64(int64(v.Int32()))
	case parquet.Int64:
		n.SetInt64(v.Int64())
	default:
		raw := v.ByteArray()
		n.SetBytes(raw)
		if len(raw) > 0 && raw[0]&0x80 != 0 { // two's complement
			n.Sub(n, new(big.Int).Lsh(big.NewInt(1), uint(8*len(raw))))
		}
	}
	x, err := doubledouble.Parse(n.String() + "e" + strconv.Itoa(-scale))
	if err != nil {
		return doubledouble.From(math.NaN())
	}
	return x
}

// whole keeps the digits of a 64-bit whole number that a float64 would drop.
func whole(n *big.Int) doubledouble.Number {
	hi, _ := new(big.Float).SetInt(n).Float64()
	near, _ := big.NewFloat(hi).Int(nil)
	return doubledouble.Number{Hi: hi, Lo: float64(new(big.Int).Sub(n, near).Int64())}
}
