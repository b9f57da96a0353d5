package dataset

import "modelmend/fit/doubledouble"

// plainRows reads the rows of a text without quotes and without lone carriage returns, looking once at each sign of a plain number. Whatever is no
// plain number goes the way of rows, so that both give the same table and the same errors.
func (r *reading) plainRows(line int) error {
	text, delimiter := r.text, r.delimiter
	r.pending = 0
	for i := 0; i < len(text); {
		if end, blank := blankLine(text, i, delimiter); blank {
			r.pending++
			i = end
			line++
			continue
		}
		r.passBlanks(r.pending, line)
		r.pending = 0
		start, fields := i, 0
		for {
			if fields == len(r.builders) {
				return r.ragged(line, r.width(start))
			}
			b := r.builders[fields]
			end, ok := b.scan(text, i, delimiter, line)
			if !ok {
				end = fieldEnd(text, i, delimiter)
				b.add(cell{text: trimBlanks(text[i:end])}, line)
			}
			fields++
			i = end
			if i >= len(text) || text[i] != delimiter {
				break
			}
			i++
		}
		if fields != len(r.builders) {
			return r.ragged(line, fields)
		}
		if i < len(text) && text[i] == '\r' {
			i++
		}
		i++
		r.table.Lines = append(r.table.Lines, line)
		r.table.Rows++
		line++
	}
	return nil
}

// blankLine reports whether the line at i is empty or holds blanks only, and where the next one starts.
func blankLine(text string, i int, delimiter byte) (next int, blank bool) {
	for ; i < len(text); i++ {
		switch c := text[i]; {
		case c == '\n':
			return i + 1, true
		case c == '\r', c == ' ', c == '\t' && delimiter != '\t':
		case c == 0xC2 && i+1 < len(text) && text[i+1] == 0xA0: // a no-break space
			i++
		default:
			return 0, false
		}
	}
	return i, true
}

func fieldEnd(text string, i int, delimiter byte) int {
	for i < len(text) && text[i] != delimiter && text[i] != '\n' && text[i] != '\r' {
		i++
	}
	return i
}

// width counts the fields of the record at start.
func (r *reading) width(start int) int {
	s := newSplitter(r.text[start:], r.delimiter)
	s.next()
	return len(s.fields)
}

// scan reads a plain number that fills the field at i, stores it and returns where the field ends; false for any other field, of which nothing is
// stored. A skipped field is passed over.
func (b *builder) scan(text string, i int, delimiter byte, line int) (end int, ok bool) {
	if b.column.Kind == Skipped {
		return fieldEnd(text, i, delimiter), true
	}
	if b.index != nil {
		return 0, false
	}
	v, shape, end, ok := plainNumber(text, i)
	if !ok || (end < len(text) && text[end] != delimiter && text[end] != '\n' && text[end] != '\r') {
		return 0, false
	}
	b.storeNumber(v, text[i:end], shape, line)
	return end, true
}

// plain stores a cell of digits with or without a point, the form of nearly every number; it reports false for any other.
func (b *builder) plain(s string, line int) bool {
	if b.index != nil {
		return false
	}
	v, shape, end, ok := plainNumber(s, 0)
	if !ok || end < len(s) {
		return false
	}
	b.storeNumber(v, s, shape, line)
	return true
}

func (b *builder) storeNumber(v doubledouble.Number, cell string, shape shape, line int) {
	b.count(cell, shape, line)
	b.makeRoom()
	b.store(v.Hi, v.Lo)
	b.rows++
}

// plainNumber reads a sign, digits and at most one point at i, at most 15 digits in all, and returns where they end.
func plainNumber(text string, i int) (v doubledouble.Number, form shape, end int, ok bool) {
	negative := false
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		negative = text[i] == '-'
		i++
	}
	first := i
	var mant int64
	for i < len(text) {
		c := text[i] - '0'
		if c > 9 {
			break
		}
		mant = mant*10 + int64(c)
		i++
	}
	before, after := i-first, 0
	form = shape{form: wholeForm, short: before <= 3}
	if i < len(text) && text[i] == '.' {
		i++
		point := i
		for i < len(text) {
			c := text[i] - '0'
			if c > 9 {
				break
			}
			mant = mant*10 + int64(c)
			i++
		}
		after = i - point
		form.form = pointForm
		form.decimals = after
		form.groupsLike = after == 3 && before >= 1 && before <= 3 && text[first] != '0'
	}
	if digits := before + after; digits == 0 || digits > 15 {
		return v, form, i, false
	}
	m := float64(mant)
	if negative {
		m = -m // minus zero included
	}
	v, _ = doubledouble.Scaled(m, -after) // at most 15 decimals
	return v, form, i, true
}
