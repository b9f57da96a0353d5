package dataset

import (
	"compress/gzip"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"os"
	"path/filepath"
	"strings"

	"github.com/klauspost/compress/zstd"
)

// mostExpansion bounds how much larger a file may become when it is unpacked, beyond a first mostUnpacked bytes: a table of digits shrinks
// about threefold, a bomb a thousandfold.
const (
	mostExpansion = 200
	mostUnpacked  = 64 << 20
)

// input is the text of a file from its first byte on, unpacked where its ending is .gz or .zst.
type input struct {
	path  string
	kind  string // "gzip", "zstd", or "" for a file that is read as it is
	size  int64  // of the file
	file  *os.File
	disk  io.Reader // the file, hashed as it is read
	sum   hash.Hash
	text  io.Reader
	close func() // ends the unpacking
	left  int64  // bytes that may still come out of the unpacking
}

func isCompressed(path string) bool { return packing(path) != "" }

// packing names the way a file is compressed, "" for none.
func packing(path string) string {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".gz":
		return "gzip"
	case ".zst":
		return "zstd"
	}
	return ""
}

// openInput opens a file for one reading.
func openInput(path string) (in *input, err error) {
	f, info, err := openFile(path)
	if err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			f.Close()
		}
	}()
	in = &input{path: path, kind: packing(path), size: info.Size(), file: f, sum: sha256.New(), close: func() {}}
	in.disk = io.TeeReader(f, in.sum)
	in.text = in.disk
	switch in.kind {
	case "gzip":
		z, err := gzip.NewReader(in.disk)
		if err != nil {
			return nil, damaged(path, in.kind, err)
		}
		in.text, in.close = z, func() { z.Close() }
	case "zstd":
		z, err := zstd.NewReader(in.disk, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(256<<20))
		if err != nil {
			return nil, damaged(path, in.kind, err)
		}
		in.text, in.close = z, z.Close
	}
	in.left = max(int64(mostUnpacked), in.size*mostExpansion)
	return in, nil
}

// Read gives text. A compressed file ends with a *FileError where it is damaged, or once more has come out of it than a table would give.
func (in *input) Read(p []byte) (int, error) {
	if in.kind == "" {
		return in.text.Read(p)
	}
	if in.left <= 0 {
		return 0, &FileError{Path: in.path, Reason: TooLarge, Found: fmt.Sprintf("a file that unpacks to more than %d times its size", mostExpansion),
			Advice: "if it is a table all the same, unpack it first"}
	}
	n, err := in.text.Read(p[:min(int64(len(p)), in.left)])
	in.left -= int64(n)
	if err != nil && !errors.Is(err, io.EOF) {
		err = damaged(in.path, in.kind, err)
	}
	return n, err
}

// hash returns the hash of the file as it is on disk, once the text has been read: what follows the text belongs to the file.
func (in *input) hash() (string, error) {
	if _, err := io.Copy(io.Discard, in.disk); err != nil {
		return "", openError(in.path, err)
	}
	return hex.EncodeToString(in.sum.Sum(nil)), nil
}

// Close ends the reading.
func (in *input) Close() {
	in.close()
	in.file.Close()
}

func damaged(path, kind string, err error) error {
	return &FileError{Path: path, Reason: Unreadable, Found: fmt.Sprintf("a damaged %s file (%v)", kind, err), Advice: "fetch or write it again"}
}
