package dataset

import (
	"math"
	"slices"
	"strings"
)

// spotted is a cell worth a message.
type spotted struct {
	cell string
	line int // 0 when there is none
}

func (s *spotted) note(cell string, line int) {
	if s.line == 0 {
		*s = spotted{strings.Clone(cell), line}
	}
}

// builder gathers a column row by row. Values are stored as long as every cell seen is a number, codes as long as no
// number came before the first text; a column where text follows numbers is read a second time.
type builder struct {
	column    *Column
	delimiter byte
	capacity  int // rows to make room for
	rows      int

	texts, grouped         int // cells
	points, pointGroups    int // cells with a decimal point; those that could be thousands
	commas, commaGroups    int // the same with a comma
	shortWholes            int
	stray, firstGrouped    spotted
	firstPoint, firstComma spotted
	firstTrueComma         spotted // a comma that cannot separate thousands
	index                  map[string]int32
	again                  bool // codes are to be gathered in a second reading
}

func (b *builder) add(c cell, line int) {
	if b.column.Kind == Skipped {
		return
	}
	if b.plain(c.text, line) {
		return
	}
	if mark, missing := missingMark(c.text); missing {
		b.column.Missing++
		if b.column.MissingAs == nil {
			b.column.MissingAs = map[string]int{}
		}
		b.column.MissingAs[mark]++
		b.store(math.NaN(), 0)
		b.storeCode(-1)
		b.rows++
		return
	}
	b.value(c.text, line)
	b.rows++
}

// value stores a cell that is not missing.
func (b *builder) value(s string, line int) {
	shape := shapeOf(s)
	if shape.form == commaForm && b.delimiter == ',' {
		shape.form = groupedForm
	}
	switch shape.form {
	case textForm:
		b.text(s, line)
		return
	case groupedForm:
		b.grouped++
		b.firstGrouped.note(s, line)
		b.stray.note(s, line)
		b.store(math.NaN(), 0)
		b.code(s)
		return
	}
	v, ok := parse(s, shape.form)
	if !ok {
		b.text(s, line)
		return
	}
	b.count(s, shape, line)
	b.makeRoom()
	b.store(v.Hi, v.Lo)
	b.code(s)
}

// count keeps what decides on the decimal sign.
func (b *builder) count(s string, shape shape, line int) {
	b.column.NumericCells++
	b.column.Decimals = max(b.column.Decimals, shape.decimals)
	switch shape.form {
	case wholeForm:
		if shape.short {
			b.shortWholes++
		}
	case pointForm:
		b.points++
		b.firstPoint.note(s, line)
		if shape.groupsLike {
			b.pointGroups++
		}
	case commaForm:
		b.commas++
		b.firstComma.note(s, line)
		if shape.groupsLike {
			b.commaGroups++
		} else {
			b.firstTrueComma.note(s, line)
		}
	}
}

// text stores a cell that is no number, and gives up the numbers before it.
func (b *builder) text(s string, line int) {
	b.stray.note(s, line)
	if b.texts == 0 {
		if b.column.NumericCells+b.grouped > 0 {
			b.again = true
		} else {
			b.startCodes()
		}
		b.column.Hi, b.column.Lo = nil, nil
	}
	b.texts++
	b.code(s)
}

// startCodes makes room for codes; the rows before are missing.
func (b *builder) startCodes() {
	b.index = map[string]int32{}
	b.column.Codes = make([]int32, b.rows, max(b.rows, b.capacity))
	for i := range b.column.Codes {
		b.column.Codes[i] = -1
	}
}

// code stores the code of a text, new or known.
func (b *builder) code(s string) {
	if b.index == nil {
		return
	}
	code, known := b.index[s]
	if !known {
		s = strings.Clone(s)
		code = int32(len(b.column.Levels))
		b.column.Levels = append(b.column.Levels, s)
		b.index[s] = code
	}
	b.storeCode(code)
}

func (b *builder) storeCode(code int32) {
	if b.index != nil {
		b.column.Codes = append(b.column.Codes, code)
	}
}

// codeAgain stores the code of a cell in the second reading.
func (b *builder) codeAgain(s string) {
	if _, missing := missingMark(s); missing {
		b.storeCode(-1)
	} else {
		b.code(s)
	}
	b.rows++
}

// makeRoom allots the numbers at the first one; the rows before are missing.
func (b *builder) makeRoom() {
	if b.column.Hi != nil || b.texts > 0 {
		return
	}
	b.column.Hi = make([]float64, b.rows, max(b.rows, b.capacity))
	for i := range b.column.Hi {
		b.column.Hi[i] = math.NaN()
	}
}

func (b *builder) store(hi, lo float64) {
	if b.column.Hi == nil {
		return
	}
	if lo != 0 && b.column.Lo == nil {
		b.column.Lo = make([]float64, len(b.column.Hi), max(len(b.column.Hi), b.capacity))
	}
	b.column.Hi = append(b.column.Hi, hi)
	if b.column.Lo != nil {
		b.column.Lo = append(b.column.Lo, lo)
	}
}

// finish sets the kind of the column, once its numbers are known to be clear.
func (b *builder) finish() {
	c := b.column
	switch {
	case c.Kind == Skipped:
	case b.texts > 0:
		c.Kind = Text
		c.Decimals = 0
		sortLevels(c)
		if 2*c.NumericCells > b.rows-c.Missing {
			c.FirstStray, c.FirstStrayLine = b.stray.cell, b.stray.line
		}
	case c.NumericCells > 0:
		c.Kind = Number
		c.Hi, c.Lo = slices.Clip(c.Hi), slices.Clip(c.Lo)
	default:
		c.Kind, c.Codes = Empty, nil
	}
	if c.MissingAs == nil {
		c.MissingAs = map[string]int{}
	}
	b.index = nil
}

// sortLevels puts the levels in byte order and the codes with them.
func sortLevels(c *Column) {
	order := make([]int32, len(c.Levels))
	for i := range order {
		order[i] = int32(i)
	}
	slices.SortFunc(order, func(a, b int32) int { return strings.Compare(c.Levels[a], c.Levels[b]) })
	place := make([]int32, len(order))
	levels := make([]string, len(order))
	for i, old := range order {
		place[old] = int32(i)
		levels[i] = c.Levels[old]
	}
	for i, code := range c.Codes {
		if code >= 0 {
			c.Codes[i] = place[code]
		}
	}
	c.Levels = levels
}
