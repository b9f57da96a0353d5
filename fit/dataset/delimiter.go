package dataset

// What is looked at to find the delimiter.
const (
	sampleRecords = 200
	sampleBytes   = 1 << 20
)

// candidate is what a sample of the file looks like when it is split at one delimiter.
type candidate struct {
	delimiter byte
	width     int     // fields of the first record
	agreeing  float64 // share of the other records with as many fields
	numbers   float64 // share of their cells that are numbers or missing
}

// findDelimiter returns the delimiter under which the records of the file agree best on the number of fields, which
// has to be two at least. Where several agree in all records, the one with the largest share of numbers wins, then the
// one with more fields, then comma before semicolon before tab. A file of one column gets a comma.
func findDelimiter(text string) byte {
	best := candidate{delimiter: ','}
	for _, d := range []byte{',', ';', '\t'} {
		c := sample(text, d)
		if c.width >= 2 && c.better(best) {
			best = c
		}
	}
	return best.delimiter
}

func (c candidate) better(best candidate) bool {
	switch {
	case best.width < 2:
		return true
	case c.agreeing != best.agreeing:
		return c.agreeing > best.agreeing
	case c.numbers != best.numbers:
		return c.numbers > best.numbers
	}
	return c.width > best.width
}

func sample(text string, delimiter byte) candidate {
	c := candidate{delimiter: delimiter}
	s := newSplitter(text, delimiter)
	records, agreeing, cells, numbers := 0, 0, 0, 0
	for records < sampleRecords && s.at < sampleBytes {
		_, ok, err := s.next()
		if err != nil || !ok {
			break
		}
		if s.blank() {
			continue
		}
		if c.width == 0 {
			c.width = len(s.fields)
			continue
		}
		records++
		if len(s.fields) == c.width {
			agreeing++
		}
		for _, f := range s.fields {
			cells++
			if _, missing := missingMark(f.text); missing || isNumber(f.text, delimiter) {
				numbers++
			}
		}
	}
	if records == 0 {
		c.agreeing = 1
		return c
	}
	c.agreeing = float64(agreeing) / float64(records)
	c.numbers = float64(numbers) / float64(cells)
	return c
}

// isNumber reports whether a cell is a number in a file of that delimiter.
func isNumber(s string, delimiter byte) bool {
	f := shapeOf(s).form
	return f == wholeForm || f == pointForm || f == commaForm && delimiter != ','
}
