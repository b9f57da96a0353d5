package dataset

import (
	"errors"
	"os"
	"runtime"
	"slices"
)

// A table of StreamBytes or more is not held by Open: of a plain file these are its bytes, of a Parquet file 8 for each value asked for. A compressed
// file is not held from PackedBytes on, since digits shrink about threefold and its table cannot be measured before it is unpacked.
const (
	StreamBytes = 16 << 20
	PackedBytes = 4 << 20
)

// ErrKinds ends a pass over a streamed table in which a column turned out to hold something else than its first rows said. Survey settles it.
var ErrKinds = errors.New("a column holds something else than its first rows")

// errWhole says that a file cannot be cut into pieces and must be read whole.
var errWhole = errors.New("the file cannot be read in pieces")

// stream is what a table needs to read its file again and again.
type stream struct {
	source   source
	path     string
	need     func(name string) bool
	surveyed bool
}

// source reads a file from its first row on, as often as it is asked to, in memory that does not grow with the rows.
type source interface {
	// pieces gives the rows in order, in pieces that are text still to be parsed or whose columns are filled, until give says that no more are
	// wanted. It returns the hash of the whole file after the last one.
	pieces(t *Table, give func(*reading) bool) (hash string, err error)
}

// Open reads the columns that need accepts. A large file (see StreamBytes) is not held: the table then knows the kinds of its columns from the
// first rows or the schema, a pass counts its rows, and Each gives them piece by piece. Files that cannot be cut into pieces (UTF-16, lone
// carriage returns) are read whole. Errors are those of ReadFile.
func Open(path string, need func(name string) bool) (*Table, error) {
	if !isLarge(path, need) {
		return ReadColumns(path, need)
	}
	return OpenInPieces(path, need, pieceBytes)
}

// isLarge reports whether a table is too large to be held; false too for what cannot be read, which ReadColumns refuses.
func isLarge(path string, need func(name string) bool) bool {
	info, err := os.Stat(path)
	switch {
	case err != nil || info.IsDir():
		return false
	case isParquet(path):
		return parquetBytes(path, need) >= StreamBytes
	case isCompressed(path):
		return info.Size() >= PackedBytes
	}
	return info.Size() >= StreamBytes
}

// OpenInPieces is Open for a file of any size, in pieces of so many bytes.
func OpenInPieces(path string, need func(name string) bool, size int) (*Table, error) {
	first := firstText
	if isParquet(path) {
		first = firstParquet
	}
	t, err := first(path, need, size)
	if errors.Is(err, errWhole) {
		return ReadColumns(path, need)
	}
	return t, err
}

// Streamed reports whether the table's rows are read from the file at each pass.
func (t *Table) Streamed() bool { return t.stream != nil }

// Each gives the rows of the table in order, piece by piece: tables with the same columns, of which only needed ones hold values. What yield is
// given must not be kept. A table that is not streamed is given as one piece. Pieces are read and parsed ahead on all cores.
//
// It returns what yield returns, ErrKinds, or the errors of ReadFile. After a whole pass Rows, Hash and Notes are known.
func (t *Table) Each(yield func(piece *Table) error) error {
	if t.stream == nil {
		return yield(t)
	}
	counts := t.counters()
	whole, err := t.pass(func(r *reading) error {
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
		return yield(piece)
	})
	if err != nil {
		return err
	}
	comma, err := checkDecimals(t.Name, counts, t.Delimiter[0])
	if err != nil {
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
	t.settle(whole, comma, counts)
	return nil
}

// settle keeps what a pass tells about the table as a whole.
func (t *Table) settle(p passed, comma bool, counts []*builder) {
	t.Rows, t.Hash, t.DecimalComma = p.rows, p.hash, comma
	t.Notes = notes(comma, counts, t.Delimiter[0], p.blanks)
}

// counters are builders that gather counts over pieces.
func (t *Table) counters() []*builder {
	out := make([]*builder, len(t.Columns))
	for j, c := range t.Columns {
		out[j] = &builder{column: &Column{Name: c.Name, Kind: c.Kind, Decimals: c.Decimals}, delimiter: t.Delimiter[0]}
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
	whole, err := t.pass(func(r *reading) error {
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
	for j, b := range builders {
		old := t.Columns[j]
		if old.Kind == Skipped {
			continue
		}
		b.rows = whole.rows
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
	t.settle(whole, comma, builders)
	return again, nil
}

// piece prepares the reading of so many rows; columns known to be text are read as text from the first cell.
func (t *Table) piece(rows int) *reading {
	r := &reading{name: t.Name, delimiter: t.Delimiter[0], table: &Table{Lines: make([]int, 0, rows)}}
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

// job is a piece on its way.
type job struct {
	r    *reading
	err  error
	done chan struct{}
}

// passed is what a whole pass has seen.
type passed struct {
	rows, blanks int
	hash         string
}

// pass reads the file from its first row, parses pieces on all cores and gives them in order.
func (t *Table) pass(yield func(*reading) error) (p passed, err error) {
	workers := runtime.GOMAXPROCS(0)
	queue := make(chan *job, workers) // in file order; bounds what is in memory
	work := make(chan *job)
	stop := make(chan struct{})
	for range workers {
		go func() {
			for j := range work {
				j.err = j.r.parse()
				close(j.done)
			}
		}()
	}
	var sourceErr error
	go func() {
		defer close(queue)
		defer close(work)
		p.hash, sourceErr = t.stream.source.pieces(t, func(r *reading) bool {
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
	var blanks blankLines
	for j := range queue {
		<-j.done
		if err == nil {
			if err = j.err; err == nil {
				p.rows += j.r.table.Rows
				blanks.take(j.r)
				err = yield(j.r)
			}
			if err != nil {
				close(stop)
			}
		}
	}
	switch {
	case err != nil:
		return p, err
	case sourceErr != nil:
		return p, sourceErr
	case p.rows == 0:
		return p, &FileError{Path: t.Name, Reason: HeaderOnly, Found: "column names and no rows", Advice: "add rows of values below the names"}
	}
	p.blanks = blanks.between
	return p, nil
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
