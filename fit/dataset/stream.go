package dataset

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"io"
	"os"
	"runtime"
	"slices"
	"strings"
	"unicode/utf8"
)

// StreamBytes is the size from which Open does not hold a file in memory.
const StreamBytes = 16 << 20

// ErrKinds ends a pass over a streamed table in which a column turned out to hold something else than its first rows said. Survey settles it.
var ErrKinds = errors.New("a column holds something else than its first rows")

// errWhole says that a file cannot be cut into pieces and must be read whole.
var errWhole = errors.New("the file cannot be read in pieces")

// stream is what a table needs to read its file again and again.
type stream struct {
	path     string
	need     func(name string) bool
	size     int // of a piece
	header   int // bytes before the first row, the byte-order mark included
	line     int // of the first row
	surveyed bool
}

// Open reads the columns that need accepts. A file of StreamBytes or more is not held: the table then knows the kinds of its columns from the
// first rows, Rows is 0 until a pass has counted them, and Each gives the rows piece by piece. Files that cannot be cut into pieces (UTF-16, lone
// carriage returns) are read whole. Errors are those of ReadFile.
func Open(path string, need func(name string) bool) (*Table, error) {
	info, err := os.Stat(path)
	if err != nil || info.IsDir() || info.Size() < StreamBytes || isCompressed(path) || isParquet(path) {
		return ReadColumns(path, need)
	}
	return OpenInPieces(path, need, pieceBytes)
}

// OpenInPieces is Open for a file of any size, in pieces of so many bytes.
func OpenInPieces(path string, need func(name string) bool, size int) (*Table, error) {
	t, err := firstPiece(path, need, size)
	if errors.Is(err, errWhole) {
		return ReadColumns(path, need)
	}
	return t, err
}

// firstPiece reads the header and the kinds of the columns from the start of the file.
func firstPiece(path string, need func(name string) bool, size int) (*Table, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, openError(path, err)
	}
	defer f.Close()
	head := make([]byte, size)
	n, err := io.ReadFull(f, head)
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
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
	t.stream = &stream{path: path, need: need, size: size, header: bom + s.at, line: s.line}
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

// Streamed reports whether the table's rows are read from the file at each pass.
func (t *Table) Streamed() bool { return t.stream != nil }

// Each gives the rows of the table in order, piece by piece: tables with the same columns, of which only needed ones hold values. What yield is
// given must not be kept. A table that is not streamed is given as one piece. Pieces are read and parsed ahead on all cores.
//
// It returns what yield returns, ErrKinds, or the errors of ReadFile. After a whole pass Rows and Hash are known.
func (t *Table) Each(yield func(piece *Table) error) error {
	if t.stream == nil {
		return yield(t)
	}
	rows := 0
	counts := t.counters()
	hash, err := t.pass(func(r *reading) error {
		for j, b := range r.builders {
			if c := t.Columns[j]; c.Kind == Number && b.texts+b.grouped > 0 {
				return ErrKinds
			}
			counts[j].takeCounts(b)
		}
		piece := &Table{Name: t.Name, Rows: r.table.Rows, Lines: r.table.Lines, Delimiter: t.Delimiter, DecimalComma: t.DecimalComma}
		for j, b := range r.builders {
			piece.Columns = append(piece.Columns, b.streamed(t.Columns[j], r.table.Rows))
		}
		rows += r.table.Rows
		return yield(piece)
	})
	if err != nil {
		return err
	}
	t.Rows, t.Hash = rows, hash
	if t.DecimalComma, err = checkDecimals(t.Name, counts, t.Delimiter[0]); err != nil {
		return err
	}
	for j, b := range counts {
		c := t.Columns[j]
		c.NumericCells, c.Missing, c.MissingAs = b.column.NumericCells, b.column.Missing, b.column.MissingAs
		if c.Kind == Number {
			c.Decimals = b.column.Decimals
			if c.NumericCells == 0 {
				c.Kind = Empty
			}
		}
	}
	return nil
}

// counters are builders that gather counts over pieces.
func (t *Table) counters() []*builder {
	out := make([]*builder, len(t.Columns))
	for j, c := range t.Columns {
		out[j] = &builder{column: &Column{Name: c.Name, Kind: c.Kind}, delimiter: t.Delimiter[0]}
	}
	return out
}

// streamed makes a column of a piece fit its table: text codes in the table's levels, numbers missing where there were none.
func (b *builder) streamed(whole *Column, rows int) *Column {
	c := b.column
	c.Kind, c.Decimals = whole.Kind, whole.Decimals
	switch whole.Kind {
	case Number:
		b.rows = rows
		b.makeRoom()
	case Text:
		c.Hi, c.Lo = nil, nil
		place := make([]int32, len(c.Levels))
		for i, level := range c.Levels {
			at, known := slices.BinarySearch(whole.Levels, level)
			if !known {
				at = -1
			}
			place[i] = int32(at)
		}
		for i, code := range c.Codes {
			if code >= 0 {
				c.Codes[i] = place[code]
			}
		}
		c.Levels = whole.Levels
	}
	return c
}

// Survey passes over a streamed table once to settle what each column is: kinds, levels, decimals, missing values. It is needed where a text column
// is used, or after ErrKinds; a second call does nothing.
func (t *Table) Survey() error {
	if t.stream == nil || t.stream.surveyed {
		return nil
	}
	for range 2 {
		again, err := t.survey()
		if err != nil {
			return err
		}
		if !again {
			t.stream.surveyed = true
			return nil
		}
	}
	return errWhole
}

// survey makes one pass; again says that a column is text which some pieces took for numbers, so that its levels are not all known.
func (t *Table) survey() (again bool, err error) {
	builders := t.counters()
	levels := make([]map[string]bool, len(builders))
	rows := 0
	hash, err := t.pass(func(r *reading) error {
		rows += r.table.Rows
		for j, b := range r.builders {
			if t.Columns[j].Kind == Skipped {
				continue
			}
			builders[j].takeCounts(b)
			if levels[j] == nil {
				levels[j] = map[string]bool{}
			}
			for _, l := range b.column.Levels {
				levels[j][l] = true
			}
		}
		return nil
	})
	if err != nil {
		return false, err
	}
	comma, err := checkDecimals(t.Name, builders, t.Delimiter[0])
	if err != nil {
		return false, err
	}
	t.DecimalComma, t.Rows, t.Hash = comma, rows, hash
	for j, b := range builders {
		old := t.Columns[j]
		if old.Kind == Skipped {
			continue
		}
		b.rows = rows
		c := b.column
		c.Kind = 0
		b.finish()
		if c.Kind == Text {
			for l := range levels[j] {
				c.Levels = append(c.Levels, l)
			}
			slices.Sort(c.Levels)
			again = again || old.Kind != Text
		}
		t.Columns[j] = c
	}
	return again, nil
}

// job is a piece on its way.
type job struct {
	r    *reading
	err  error
	done chan struct{}
}

// pass reads the file from its first row, parses pieces on all cores, gives them in order, and returns the hash of the whole file.
func (t *Table) pass(yield func(*reading) error) (hash string, err error) {
	f, err := os.Open(t.stream.path)
	if err != nil {
		return "", openError(t.stream.path, err)
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.CopyN(sum, f, int64(t.stream.header)); err != nil {
		return "", openError(t.stream.path, err)
	}
	workers := runtime.GOMAXPROCS(0)
	queue := make(chan *job, workers) // in file order; bounds what is in memory
	work := make(chan *job)
	stop := make(chan struct{})
	for range workers {
		go func() {
			for j := range work {
				if strings.IndexByte(j.r.text, '"') < 0 {
					j.err = j.r.plainRows(j.r.firstLine)
				} else {
					s := newSplitter(j.r.text, j.r.delimiter)
					s.line = j.r.firstLine
					j.err = j.r.rows(s)
				}
				if j.err == nil {
					j.r.text = ""
				}
				close(j.done)
			}
		}()
	}
	var readErr error
	go func() {
		defer close(queue)
		defer close(work)
		readErr = t.cut(f, sum, func(r *reading) bool {
			j := &job{r: r, done: make(chan struct{})}
			select {
			case queue <- j:
			case <-stop:
				return false
			}
			work <- j
			return true
		})
	}()
	rows := 0
	for j := range queue {
		<-j.done
		if err == nil {
			if err = j.err; err == nil {
				rows += j.r.table.Rows
				err = yield(j.r)
			}
			if err != nil {
				close(stop)
			}
		}
	}
	switch {
	case err != nil:
		return "", err
	case readErr != nil:
		return "", readErr
	case rows == 0:
		return "", &FileError{Path: t.Name, Reason: HeaderOnly, Found: "column names and no rows", Advice: "add rows of values below the names"}
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}

// cut reads the file in pieces that end with a record.
func (t *Table) cut(f io.Reader, sum io.Writer, give func(*reading) bool) error {
	line := t.stream.line
	var carry []byte
	for {
		buf := make([]byte, len(carry)+t.stream.size)
		copy(buf, carry)
		n, err := io.ReadFull(f, buf[len(carry):])
		if err != nil && !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
			return openError(t.stream.path, err)
		}
		last := err != nil
		sum.Write(buf[len(carry) : len(carry)+n])
		buf = buf[:len(carry)+n]
		end := len(buf)
		if !last {
			if end = lastRecord(buf, t.Delimiter[0]); end <= 0 {
				carry = buf // a record longer than a piece
				if len(carry) > 64*t.stream.size+(64<<20) {
					return errWhole
				}
				continue
			}
		}
		text := string(buf[:end])
		carry = slices.Clone(buf[end:])
		if !utf8.ValidString(text) || strings.IndexByte(text, 0) >= 0 || loneReturn(text) {
			return errWhole
		}
		if text != "" && !give(t.piece(text, line)) {
			return nil
		}
		line += strings.Count(text, "\n")
		if last {
			return nil
		}
	}
}

// piece prepares the reading of one piece; columns known to be text are read as text from the first cell.
func (t *Table) piece(text string, line int) *reading {
	rows := strings.Count(text, "\n") + 1
	r := &reading{name: t.Name, text: text, delimiter: t.Delimiter[0], table: &Table{Lines: make([]int, 0, rows)}, firstLine: line}
	for _, c := range t.Columns {
		b := &builder{column: &Column{Name: c.Name}, delimiter: t.Delimiter[0], capacity: rows}
		switch c.Kind {
		case Skipped:
			b.column.Kind = Skipped
		case Text:
			b.texts = 1
			b.startCodes()
		}
		r.builders = append(r.builders, b)
	}
	return r
}

// Whole reads a streamed table into memory after all.
func (t *Table) Whole() (*Table, error) {
	if t.stream == nil {
		return t, nil
	}
	whole, err := ReadColumns(t.stream.path, t.stream.need)
	if whole != nil {
		whole.Name = t.Name
	}
	return whole, err
}

// CannotCut reports whether an error of Each or Survey means that the file must be read whole.
func CannotCut(err error) bool { return errors.Is(err, errWhole) }
