package dataset

import (
	"bufio"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// maxBytes bounds what is read into memory.
const maxBytes = 4 << 30

// otherEndings are formats that this version does not read.
var otherEndings = []string{".bz2", ".xz", ".zip", ".xls", ".xlsx", ".ods", ".feather", ".arrow"}

// ReadFile reads the table in a file.
//
// It returns a *FileError when the file cannot be opened or is no table, a *LayoutError when its rows or
// names are wrong, and a *CellError when a number cannot be read without a guess. Memory is that of the file and of
// the columns: 8 bytes a number, 16 where decimals need them, 4 bytes and the distinct values for text.
func ReadFile(path string) (*Table, error) { return ReadColumns(path, nil) }

// ReadColumns is ReadFile for the columns that need accepts by name; the others are Skipped. need may be nil.
func ReadColumns(path string, need func(name string) bool) (*Table, error) {
	ending := strings.ToLower(filepath.Ext(path))
	for _, other := range otherEndings {
		if ending == other {
			return nil, &FileError{Path: path, Reason: OtherFormat, Found: "a " + ending + " file",
				Advice: "this version reads CSV and TSV, plain or as .gz or .zst, and Parquet, so save the table as one of these first"}
		}
	}
	if isParquet(path) {
		return readParquet(path, need)
	}
	in, err := openInput(path)
	if err != nil {
		return nil, err
	}
	defer in.Close()
	size := in.size
	if in.kind != "" {
		size = 0 // that of the text is not known
	}
	t, err := read(in, path, size, need)
	if err != nil {
		return nil, err
	}
	t.Hash, err = in.hash()
	return t, err
}

// openFile opens a file that is no folder.
func openFile(path string) (*os.File, fs.FileInfo, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, openError(path, err)
	}
	info, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, nil, openError(path, err)
	}
	if info.IsDir() {
		f.Close()
		return nil, nil, &FileError{Path: path, Reason: Directory, Found: "a folder", Advice: "give the path of a file in it"}
	}
	return f, info, nil
}

// openError says why a file cannot be opened or read on; an error that says so already stays as it is.
func openError(path string, err error) error {
	var known *FileError
	if errors.As(err, &known) {
		return known
	}
	if errors.Is(err, fs.ErrNotExist) {
		return &FileError{Path: path, Reason: NotFound, Found: "no such file", Advice: "check the path and the folder you are in", Err: err}
	}
	if errors.Is(err, fs.ErrPermission) {
		return &FileError{Path: path, Reason: Unreadable, Found: "a file that may not be read", Advice: "change its permissions", Err: err}
	}
	return &FileError{Path: path, Reason: Unreadable, Found: "a file that cannot be read (" + err.Error() + ")", Advice: "check the path and the disk", Err: err}
}

// Read reads the table that r gives; name stands for the path in messages and in the table. Errors are those of
// ReadFile.
func Read(r io.Reader, name string) (*Table, error) {
	sum := sha256.New()
	t, err := read(io.TeeReader(r, sum), name, 0, nil)
	if err == nil {
		t.Hash = hex.EncodeToString(sum.Sum(nil))
	}
	return t, err
}

// read takes the size of the text where it is known, to make room at once. It leaves the hash to the caller.
func read(r io.Reader, name string, size int64, need func(name string) bool) (*Table, error) {
	buffered := bufio.NewReaderSize(r, 1<<16)
	head, err := buffered.Peek(4096)
	if err != nil && !errors.Is(err, io.EOF) {
		return nil, openError(name, err)
	}
	if err := checkHead(name, head); err != nil {
		return nil, err
	}
	var content strings.Builder
	if size > 0 && size <= maxBytes {
		content.Grow(int(size) + 1)
	}
	n, err := io.Copy(&content, io.LimitReader(buffered, maxBytes+1))
	if err != nil {
		return nil, openError(name, err)
	}
	if n > maxBytes {
		return nil, &FileError{Path: name, Reason: TooLarge, Found: fmt.Sprintf("more than %d bytes", int64(maxBytes)),
			Advice: "leave out columns that the study does not need"}
	}
	text, notes, err := decode(name, content.String())
	if err != nil {
		return nil, err
	}
	t, err := build(name, text, need)
	if err != nil {
		return nil, err
	}
	t.Notes = append(notes, t.Notes...)
	return t, nil
}
