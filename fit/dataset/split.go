package dataset

import "strings"

// cell is one field; quoted tells that it stood in quotes, which are not part of text.
type cell struct {
	text   string
	quoted bool
}

// splitter cuts text into records. Lines end with LF, CRLF or CR. A field that starts with a quote, after blanks or
// not, ends with a quote; a doubled quote inside stands for one. Other fields lose the blanks around them, and a quote
// inside them is kept as it is. CRLF inside quotes becomes LF.
type splitter struct {
	text      string
	delimiter byte
	at        int
	line      int // of at, from 1
	fields    []cell
}

// splitError is where and why splitting failed.
type splitError struct {
	reason          Reason
	line, character int
	field           int
}

func newSplitter(text string, delimiter byte) *splitter {
	return &splitter{text: text, delimiter: delimiter, line: 1}
}

// next reads a record into fields, which the following call overwrites, and returns the line where it starts.
// ok is false at the end of the text.
func (s *splitter) next() (line int, ok bool, err *splitError) {
	if s.at >= len(s.text) {
		return s.line, false, nil
	}
	line = s.line
	s.fields = s.fields[:0]
	for {
		if err := s.field(); err != nil {
			return line, false, err
		}
		if s.at >= len(s.text) {
			return line, true, nil
		}
		c := s.text[s.at]
		s.at++
		if c == s.delimiter {
			continue
		}
		if c == '\r' && s.at < len(s.text) && s.text[s.at] == '\n' {
			s.at++
		}
		s.line++
		return line, true, nil
	}
}

// blank reports whether the record last read is an empty line or one of blanks only.
func (s *splitter) blank() bool {
	return len(s.fields) == 1 && !s.fields[0].quoted && s.fields[0].text == ""
}

// field reads a field and stops at the sign that ends it.
func (s *splitter) field() *splitError {
	start := s.at
	i := start
	for i < len(s.text) && (s.text[i] == ' ' || s.text[i] == '\t' && s.delimiter != '\t') {
		i++
	}
	if i < len(s.text) && s.text[i] == '"' {
		return s.quotedField(i)
	}
	for i < len(s.text) {
		c := s.text[i]
		if c == s.delimiter || c == '\n' || c == '\r' {
			break
		}
		i++
	}
	s.fields = append(s.fields, cell{text: trimBlanks(s.text[start:i])})
	s.at = i
	return nil
}

// quotedField reads a field whose opening quote stands at open.
func (s *splitter) quotedField(open int) *splitError {
	openLine, simple := s.line, true
	i := open + 1
	for {
		if i >= len(s.text) {
			return &splitError{reason: OpenQuote, line: openLine, character: s.character(open), field: len(s.fields) + 1}
		}
		switch c := s.text[i]; c {
		case '"':
			if i+1 < len(s.text) && s.text[i+1] == '"' {
				simple = false
				i++
				break
			}
			return s.closeQuote(open, i, simple)
		case '\n':
			s.line++
		case '\r':
			simple = false
			if i+1 >= len(s.text) || s.text[i+1] != '\n' {
				s.line++
			}
		}
		i++
	}
}

// closeQuote stores the field between two quotes and passes over the blanks after it.
func (s *splitter) closeQuote(open, end int, simple bool) *splitError {
	text := s.text[open+1 : end]
	if !simple {
		text = strings.ReplaceAll(strings.ReplaceAll(text, `""`, `"`), "\r\n", "\n")
	}
	i := end + 1
	for i < len(s.text) && (s.text[i] == ' ' || s.text[i] == '\t' && s.delimiter != '\t') {
		i++
	}
	if i < len(s.text) && s.text[i] != s.delimiter && s.text[i] != '\n' && s.text[i] != '\r' {
		return &splitError{reason: AfterQuote, line: s.line, character: s.character(i), field: len(s.fields) + 1}
	}
	s.fields = append(s.fields, cell{text: text, quoted: true})
	s.at = i
	return nil
}

// character returns the place of a byte within its line, counted in signs from 1.
func (s *splitter) character(at int) int { return characterIn(s.text, at) }

func characterIn(text string, at int) int {
	start := strings.LastIndexAny(text[:at], "\r\n") + 1
	return len([]rune(text[start:at])) + 1
}

// trimBlanks removes spaces, tabs and no-break spaces from both ends.
func trimBlanks(s string) string {
	if s == "" || s[0] > ' ' && s[0] < 0x80 && s[len(s)-1] > ' ' && s[len(s)-1] < 0x80 {
		return s
	}
	return strings.Trim(s, " \t\u00A0")
}
