package dataset

import (
	"strings"

	"modelmend/fit/parallel"
)

// Text without quotes is cut at line ends into pieces of about this size, which are read side by side. A piece does not depend on the number
// of cores.
const pieceBytes = 1 << 19

// pieces cuts the rows of a large text without quotes; nil where it is to be read in one go. Lines that end with a lone CR are left to the
// one-go reading, which counts them.
func (r *reading) pieces(at, line, size int) []*reading {
	rest := r.text[at:]
	if len(rest) < 2*size || len(r.builders) < 2 || strings.IndexByte(rest, '"') >= 0 || loneReturn(rest) {
		return nil
	}
	var out []*reading
	for len(rest) > 0 {
		end := len(rest)
		if end > size {
			if i := strings.IndexByte(rest[size:], '\n'); i >= 0 {
				end = size + i + 1
			}
		}
		p := &reading{name: r.name, text: rest[:end], delimiter: r.delimiter, table: &Table{}, firstLine: line}
		rows := strings.Count(p.text, "\n") + 1
		for _, b := range r.builders {
			p.builders = append(p.builders, &builder{column: &Column{Name: b.column.Name, Kind: b.column.Kind}, delimiter: r.delimiter, capacity: rows})
		}
		p.table.Lines = make([]int, 0, rows)
		line += rows - 1
		out = append(out, p)
		rest = rest[end:]
	}
	return out
}

func loneReturn(s string) bool {
	for {
		i := strings.IndexByte(s, '\r')
		if i < 0 {
			return false
		}
		if i+1 >= len(s) || s[i+1] != '\n' {
			return true
		}
		s = s[i+2:]
	}
}

// sideBySide reads pieces on all cores and joins them in order. The first error in file order is the one returned.
func (r *reading) sideBySide(pieces []*reading) error {
	errs := make([]error, len(pieces))
	parallel.Each(len(pieces), 0, func(i int) {
		errs[i] = pieces[i].plainRows(pieces[i].firstLine)
	})
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	var blanks blankLines
	for _, p := range pieces {
		r.table.Rows += p.table.Rows
		blanks.take(p)
	}
	r.blanks = blanks.between
	r.table.Lines = make([]int, 0, r.table.Rows)
	for _, p := range pieces {
		r.table.Lines = append(r.table.Lines, p.table.Lines...)
	}
	parallel.Each(len(r.builders), 0, func(j int) { r.join(j, pieces) })
	return nil
}

// blankLines counts the blank lines between the rows of pieces.
type blankLines struct {
	between int
	waiting int // they count once a row follows
}

// take adds those of the next piece.
func (b *blankLines) take(p *reading) {
	if p.table.Rows > 0 {
		b.between += b.waiting + p.blanks
		b.waiting = 0
	}
	b.waiting += p.pending
}

// join makes one column of the pieces' columns.
func (r *reading) join(j int, pieces []*reading) {
	b := r.builders[j]
	if b.column.Kind == Skipped {
		return
	}
	low := false
	for _, p := range pieces {
		b.takeCounts(p.builders[j])
		low = low || p.builders[j].column.Lo != nil
	}
	b.rows = r.table.Rows
	if b.texts > 0 {
		b.startCodes()
		b.column.Codes = make([]int32, 0, r.table.Rows)
		for _, p := range pieces {
			b.takeCodes(p.codes(j))
		}
		return
	}
	if b.column.NumericCells == 0 && b.grouped == 0 {
		return
	}
	c := b.column
	c.Hi = make([]float64, 0, r.table.Rows)
	if low {
		c.Lo = make([]float64, 0, r.table.Rows)
	}
	for _, p := range pieces {
		q := p.builders[j]
		q.makeRoom() // a piece of missing cells only
		c.Hi = append(c.Hi, q.column.Hi...)
		if low {
			if q.column.Lo == nil {
				q.column.Lo = make([]float64, len(q.column.Hi))
			}
			c.Lo = append(c.Lo, q.column.Lo...)
		}
		q.column.Hi, q.column.Lo = nil, nil
	}
}

// takeCounts adds what a later piece has counted.
func (b *builder) takeCounts(q *builder) {
	b.texts += q.texts
	b.grouped += q.grouped
	b.points += q.points
	b.pointGroups += q.pointGroups
	b.commas += q.commas
	b.commaGroups += q.commaGroups
	b.shortWholes += q.shortWholes
	for _, s := range []struct{ to, from *spotted }{{&b.stray, &q.stray}, {&b.firstGrouped, &q.firstGrouped}, {&b.firstPoint, &q.firstPoint},
		{&b.firstComma, &q.firstComma}, {&b.firstTrueComma, &q.firstTrueComma}} {
		if s.to.line == 0 {
			*s.to = *s.from
		}
	}
	c, d := b.column, q.column
	c.NumericCells += d.NumericCells
	c.Decimals = max(c.Decimals, d.Decimals)
	c.Missing += d.Missing
	for mark, n := range d.MissingAs {
		if c.MissingAs == nil {
			c.MissingAs = map[string]int{}
		}
		c.MissingAs[mark] += n
	}
}

// codes returns the column of a piece as codes, read a second time where the piece took it for numbers.
func (r *reading) codes(j int) *Column {
	b := r.builders[j]
	if b.index != nil && !b.again {
		return b.column
	}
	b.column.Levels = nil
	r.second([]int{j}, true)
	return b.column
}

// takeCodes appends the codes of a later piece, its levels met here.
func (b *builder) takeCodes(c *Column) {
	place := make([]int32, len(c.Levels))
	for i, level := range c.Levels {
		code, known := b.index[level]
		if !known {
			code = int32(len(b.column.Levels))
			b.column.Levels = append(b.column.Levels, level)
			b.index[level] = code
		}
		place[i] = code
	}
	for _, code := range c.Codes {
		if code >= 0 {
			code = place[code]
		}
		b.column.Codes = append(b.column.Codes, code)
	}
}
