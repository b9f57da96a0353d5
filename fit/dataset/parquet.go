package dataset

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"math"
	"math/big"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
	"modelmend/fit/parallel"
)

func isParquet(path string) bool { return strings.EqualFold(filepath.Ext(path), ".parquet") }

// readParquet reads the columns that need accepts from a Parquet file: numbers of every width, decimals with every digit, truth values as 0 and 1, text, and
// dates as text in ISO form. Nested and repeated columns are refused when they are asked for.
func readParquet(path string, need func(name string) bool) (*Table, error) {
	p, err := openParquet(path, need)
	if err != nil {
		return nil, err
	}
	defer p.close()
	r, err := p.next(p.table.Rows)
	if err != nil {
		return nil, err
	}
	t := p.table
	t.Lines, t.Hash = r.table.Lines, p.hash()
	for j, b := range r.builders {
		b.finish()
		t.Columns[j] = b.column
	}
	return t, nil
}

// parquetBytes is what the columns that need accepts take as numbers; 0 for a file that cannot be opened.
func parquetBytes(path string, need func(name string) bool) float64 {
	p, err := openParquet(path, need)
	if err != nil {
		return 0
	}
	defer p.close()
	return 8 * float64(p.table.Rows) * float64(p.asked)
}

// parquetSource reads a Parquet file in pieces of so many rows.
type parquetSource struct {
	path string
	need func(name string) bool
	rows int
}

// firstParquet takes the columns and their kinds from the schema.
func firstParquet(path string, need func(name string) bool, size int) (*Table, error) {
	p, err := openParquet(path, need)
	if err != nil {
		return nil, err
	}
	defer p.close()
	t := p.table
	t.stream = &stream{source: &parquetSource{path: path, need: need, rows: max(1, size/(8*max(1, p.asked)))}, path: path, need: need}
	return t, nil
}

// pieces gives the rows of all row groups.
func (s *parquetSource) pieces(t *Table, give func(*reading) bool) (hash string, err error) {
	p, err := openParquet(s.path, s.need)
	if err != nil {
		return "", err
	}
	defer p.close()
	if !slices.Equal(p.table.Names(), t.Names()) {
		return "", &FileError{Path: s.path, Reason: Unreadable, Found: "other columns than before", Advice: "leave the file as it is while it is read"}
	}
	for p.at < p.table.Rows {
		r, err := p.next(min(s.rows, p.table.Rows-p.at))
		if err != nil || !give(r) {
			return "", err
		}
	}
	return p.hash(), nil
}

// parquetFile is an open Parquet file that is read from its first row to its last.
type parquetFile struct {
	path    string
	file    *os.File
	size    int64
	sum     hash.Hash
	hashed  int64            // bytes
	table   *Table           // the columns with the kinds of the schema, and how many rows there are
	columns []*parquetColumn // nil where a column is skipped
	asked   int              // columns that are not
	at      int              // rows read
}

// openParquet reads the schema.
func openParquet(path string, need func(name string) bool) (p *parquetFile, err error) {
	f, info, err := openFile(path)
	if err != nil {
		return nil, err
	}
	p = &parquetFile{path: path, file: f, size: info.Size(), sum: sha256.New(), table: &Table{Name: path, Delimiter: ","}}
	if err := guarded(path, func() error { return p.schema(need) }); err != nil {
		f.Close()
		return nil, err
	}
	return p, nil
}

// guarded makes an error of a panic, which can be the library's answer to a damaged file.
func guarded(path string, f func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = damaged(path, "Parquet", fmt.Errorf("%v", r))
		}
	}()
	return f()
}

func (p *parquetFile) schema(need func(name string) bool) error {
	file, err := parquet.OpenFile(p.file, p.size, parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true))
	if err != nil {
		return damaged(p.path, "Parquet", err)
	}
	t := p.table
	if t.Rows = int(file.NumRows()); t.Rows == 0 {
		return &FileError{Path: p.path, Reason: HeaderOnly, Found: "column names and no rows", Advice: "give a file with rows"}
	}
	if t.Rows < 0 {
		return damaged(p.path, "Parquet", fmt.Errorf("%d rows", t.Rows))
	}
	seen := map[string]bool{}
	for _, field := range file.Schema().Fields() {
		name := field.Name()
		if strings.TrimSpace(name) == "" || seen[name] {
			return &FileError{Path: p.path, Reason: OtherFormat, Found: fmt.Sprintf("a column named %s, empty or for a second time", figures.Quoted(name)), Advice: "give every column a name of its own"}
		}
		seen[name] = true
		c := &Column{Name: name, Kind: Skipped}
		t.Columns = append(t.Columns, c)
		p.columns = append(p.columns, nil)
		if need != nil && !need(name) {
			continue
		}
		if !field.Leaf() || field.Repeated() {
			if need == nil {
				continue // nobody asked for it by name
			}
			return &FileError{Path: p.path, Reason: OtherFormat, Found: fmt.Sprintf("the column %s, which holds lists or records", figures.Quoted(name)), Advice: "unfold it into plain columns first"}
		}
		leaf, ok := file.Schema().Lookup(name)
		if !ok {
			return damaged(p.path, "Parquet", fmt.Errorf("column %s: it is not in the schema", name))
		}
		column := &parquetColumn{field: field, buf: make([]parquet.Value, 1024)}
		for _, group := range file.RowGroups() {
			column.chunks = append(column.chunks, group.ColumnChunks()[leaf.ColumnIndex])
		}
		p.columns[len(p.columns)-1] = column
		p.asked++
		c.Kind = Number
		if _, text := parquetReader(field, c); text != nil {
			c.Kind = Text
		}
	}
	return nil
}

// next reads so many rows, the columns side by side.
func (p *parquetFile) next(rows int) (r *reading, err error) {
	err = guarded(p.path, func() error { // for the room that a damaged count of rows would take
		r = p.table.piece(rows)
		for i := range rows {
			r.table.Lines = append(r.table.Lines, p.at+i+1) // there are no lines: rows are counted
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	r.table.Rows = rows
	p.at += rows
	errs := make([]error, len(p.columns)+1)
	parallel.Each(len(errs), 0, func(j int) {
		switch {
		case j == len(p.columns):
			errs[j] = p.hashOn()
		case p.columns[j] != nil:
			errs[j] = guarded(p.path, func() error {
				err := p.columns[j].read(r.builders[j], rows, p.at == p.table.Rows)
				if err != nil {
					return damaged(p.path, "Parquet", fmt.Errorf("column %s: %w", p.table.Columns[j].Name, err))
				}
				return nil
			})
		}
	})
	for _, err := range errs {
		if err != nil {
			return nil, err
		}
	}
	return r, nil
}

// hashOn takes the share of the file that the rows read make up into the hash.
func (p *parquetFile) hashOn() error {
	to := p.size
	if p.at < p.table.Rows {
		to = int64(float64(p.size) * float64(p.at) / float64(p.table.Rows))
	}
	n, err := io.CopyN(p.sum, p.file, to-p.hashed)
	p.hashed += n
	if err != nil {
		return openError(p.path, err)
	}
	return nil
}

// hash returns the hash of the file once the last row has been read.
func (p *parquetFile) hash() string { return hex.EncodeToString(p.sum.Sum(nil)) }

func (p *parquetFile) close() {
	for _, c := range p.columns {
		if c != nil && c.pages != nil {
			guarded(p.path, c.pages.Close)
		}
	}
	p.file.Close()
}

// parquetColumn reads the values of one column through all row groups.
type parquetColumn struct {
	field  parquet.Field
	chunks []parquet.ColumnChunk // not yet begun
	pages  parquet.Pages         // of the chunk at work
	page   parquet.Page          // at work
	values parquet.ValueReader   // of the page; nil before the first and between pages
	buf    []parquet.Value
}

// read appends the next values, so many, to b; last says that none may follow them.
func (c *parquetColumn) read(b *builder, rows int, last bool) error {
	number, text := parquetReader(c.field, b.column)
	for b.rows < rows {
		values, err := c.next(rows - b.rows)
		if errors.Is(err, io.EOF) {
			return fmt.Errorf("%d values are missing", rows-b.rows)
		}
		if err != nil {
			return err
		}
		for _, v := range values {
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
					continue
				}
				b.column.NumericCells++
				b.makeRoom()
				b.store(x.Hi, x.Lo)
				b.rows++
			}
		}
	}
	if text != nil && len(b.column.Levels) == 0 {
		b.texts = 0 // no text after all
	}
	if last {
		if _, err := c.next(1); !errors.Is(err, io.EOF) {
			return errors.New("more values than rows")
		}
	}
	return nil
}

// next returns the next values, at most so many, which hold until it is called again; io.EOF after the last.
func (c *parquetColumn) next(most int) ([]parquet.Value, error) {
	for {
		if c.values != nil {
			n, err := c.values.ReadValues(c.buf[:min(most, len(c.buf))])
			if err != nil && !errors.Is(err, io.EOF) {
				return nil, err
			}
			if n > 0 {
				return c.buf[:n], nil
			}
			if err != nil {
				parquet.Release(c.page)
				c.values = nil
			}
			continue
		}
		if err := c.nextPage(); err != nil {
			return nil, err
		}
	}
}

// nextPage takes the next page of the chunk at work, or goes to the next chunk.
func (c *parquetColumn) nextPage() (err error) {
	if c.pages != nil {
		c.page, err = c.pages.ReadPage()
		if err == nil {
			c.values = c.page.Values()
			return nil
		}
		if !errors.Is(err, io.EOF) {
			return err
		}
		pages := c.pages
		c.pages = nil
		if err := pages.Close(); err != nil {
			return err
		}
	}
	if len(c.chunks) == 0 {
		return io.EOF
	}
	c.pages, c.chunks = c.chunks[0].Pages(), c.chunks[1:]
	return nil
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
			n := v.Int64()
			switch {
			case unsigned && n < 0: // beyond the signed ones
				return whole(new(big.Int).SetUint64(v.Uint64()))
			case -1<<53 <= n && n <= 1<<53:
				return doubledouble.From(float64(n))
			}
			return whole(big.NewInt(n))
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
	if x, decimals, ok := fewDigits(v, c.Decimals); ok {
		c.Decimals = max(c.Decimals, decimals)
		return x
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

var tens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

// fewDigits finds the decimal of at most 15 digits, and at most 15 of them behind the point, that stands for v: there is one at most. It does not
// try where a value before had more.
func fewDigits(v float64, before int) (x doubledouble.Number, decimals int, ok bool) {
	if before >= len(tens) {
		return x, 0, false
	}
	for k := 1; k < len(tens); k++ {
		m := math.Round(v * tens[k])
		if math.Abs(m) >= 1e15 {
			break
		}
		if x, _ = doubledouble.Scaled(m, -k); x.Hi == v {
			return x, k, true
		}
	}
	return x, 0, false
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
