package dataset

import (
	"bytes"
	"errors"
	"io"
	"slices"
	"strings"
	"unicode/utf8"
)

// textSource reads a file of text, plain or compressed, in pieces that end with a record. A compressed file is unpacked again at each pass.
type textSource struct {
	path   string
	size   int // of a piece
	header int // bytes of text before the first row, the byte-order mark included
	line   int // of the first row
}

// firstText reads the header and the kinds of the columns from the start of the text.
func firstText(path string, need func(name string) bool, size int) (*Table, error) {
	in, err := openInput(path)
	if err != nil {
		return nil, err
	}
	defer in.Close()
	head := make([]byte, size)
	n, err := io.ReadFull(in, head)
	if err != nil && !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
		return nil, openError(path, err)
	}
	head = head[:n]
	if err := checkHead(path, head[:min(n, 4096)]); err != nil {
		return nil, err
	}
	bom := 0
	if bytes.HasPrefix(head, []byte(bomUTF8)) {
		bom = len(bomUTF8)
	}
	head = head[bom:]
	delimiter := findDelimiter(string(head))
	end := lastRecord(head, delimiter)
	if bytes.HasPrefix(head, []byte(bomLittle)) || bytes.HasPrefix(head, []byte(bomBig)) || end <= 0 {
		return nil, errWhole
	}
	text := string(head[:end])
	r := &reading{name: path, text: text, delimiter: delimiter, table: &Table{Name: path}}
	s := newSplitter(text, delimiter)
	if err := r.header(s); err != nil {
		return nil, err
	}
	t, err := buildIn(path, text, need, size)
	var layout *LayoutError
	if errors.As(err, &layout) {
		return nil, err
	}
	if err != nil {
		return nil, errWhole // whatever is wrong is found with all rows at hand
	}
	if len(t.Columns) < 2 {
		return nil, errWhole
	}
	for _, c := range t.Columns {
		c.Hi, c.Lo, c.Codes = nil, nil, nil
		if c.Kind == Empty {
			c.Kind = Number // a later piece may bring values
		}
	}
	t.Rows, t.Lines, t.Notes, t.Hash = 0, nil, nil, ""
	t.stream = &stream{source: &textSource{path: path, size: size, header: bom + s.at, line: s.line}, path: path, need: need}
	return t, nil
}

// lastRecord returns where the last complete record of b ends; 0 where there is none.
func lastRecord(b []byte, delimiter byte) int {
	if bytes.IndexByte(b, '"') < 0 {
		return bytes.LastIndexByte(b, '\n') + 1
	}
	// Quotes may hide line ends: walk the records.
	end := 0
	start, quoted, closed := true, false, false // at the start of a field; inside quotes; just behind a closing quote
	for i, c := range b {
		switch {
		case quoted:
			quoted, closed = c != '"', c == '"'
			continue
		case c == '"' && (start || closed): // a doubled quote opens again at once
			quoted, closed, start = true, false, false
			continue
		case c == '\n':
			end = i + 1
		}
		closed = false
		start = c == delimiter || c == '\n' || (start && (c == ' ' || c == '\t'))
	}
	return end
}

// pieces cuts the text behind the header.
func (s *textSource) pieces(t *Table, give func(*reading) bool) (hash string, err error) {
	in, err := openInput(s.path)
	if err != nil {
		return "", err
	}
	defer in.Close()
	if _, err := io.CopyN(io.Discard, in, int64(s.header)); err != nil {
		return "", openError(s.path, err)
	}
	line := s.line
	var carry []byte
	for {
		buf := make([]byte, len(carry)+s.size)
		copy(buf, carry)
		n, err := io.ReadFull(in, buf[len(carry):])
		if err != nil && !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
			return "", openError(s.path, err)
		}
		last := err != nil
		buf = buf[:len(carry)+n]
		end := len(buf)
		if !last {
			if end = lastRecord(buf, t.Delimiter[0]); end <= 0 {
				carry = buf // a record longer than a piece
				if len(carry) > 64*s.size+(64<<20) {
					return "", errWhole
				}
				continue
			}
		}
		text := string(buf[:end])
		carry = slices.Clone(buf[end:])
		if !utf8.ValidString(text) || strings.IndexByte(text, 0) >= 0 || loneReturn(text) {
			return "", errWhole
		}
		if text != "" && !give(t.textPiece(text, line)) {
			return "", nil
		}
		line += strings.Count(text, "\n")
		if last {
			return in.hash()
		}
	}
}

// textPiece prepares the reading of one piece.
func (t *Table) textPiece(text string, line int) *reading {
	rows := strings.Count(text, "\n") + 1
	r := t.piece(rows)
	r.text, r.firstLine = text, line
	return r
}

// parse reads the rows of a piece of text; a piece whose columns are filled stays as it is.
func (r *reading) parse() (err error) {
	if r.text == "" {
		return nil
	}
	if strings.IndexByte(r.text, '"') < 0 {
		err = r.plainRows(r.firstLine)
	} else {
		s := newSplitter(r.text, r.delimiter)
		s.line = r.firstLine
		err = r.rows(s)
	}
	if err == nil {
		r.text = ""
	}
	return err
}
