package dataset

import (
	"compress/gzip"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
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

func isCompressed(path string) bool {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".gz", ".zst":
		return true
	}
	return false
}

// readCompressed reads a gzip or zstd file. The hash is that of the file as it is on disk.
func readCompressed(f *os.File, path string, need func(name string) bool) (*Table, error) {
	info, err := f.Stat()
	if err != nil {
		return nil, openError(path, err)
	}
	sum := sha256.New()
	packed := io.TeeReader(f, sum)
	var plain io.Reader
	if strings.EqualFold(filepath.Ext(path), ".gz") {
		z, err := gzip.NewReader(packed)
		if err != nil {
			return nil, damaged(path, "gzip", err)
		}
		defer z.Close()
		plain = z
	} else {
		z, err := zstd.NewReader(packed, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(256<<20))
		if err != nil {
			return nil, damaged(path, "zstd", err)
		}
		defer z.Close()
		plain = z
	}
	limit := max(int64(mostUnpacked), info.Size()*mostExpansion)
	t, err := read(&bounded{r: plain, left: limit, path: path}, path, 0, need)
	if err != nil {
		var known *FileError
		if errors.As(err, &known) && known.Reason == Unreadable && known.Err != nil {
			if errors.As(known.Err, &known) {
				return nil, known
			}
			return nil, damaged(path, "compressed", known.Err)
		}
		return nil, err
	}
	if _, err := io.Copy(io.Discard, packed); err != nil { // what follows the last block belongs to the file
		return nil, openError(path, err)
	}
	t.Hash = hex.EncodeToString(sum.Sum(nil))
	return t, nil
}

func damaged(path, kind string, err error) error {
	return &FileError{Path: path, Reason: Unreadable, Found: fmt.Sprintf("a damaged %s file (%v)", kind, err), Advice: "fetch or write it again"}
}

// bounded ends with an error once more has come out than a table would give.
type bounded struct {
	r    io.Reader
	left int64
	path string
}

func (b *bounded) Read(p []byte) (int, error) {
	if b.left <= 0 {
		return 0, &FileError{Path: b.path, Reason: TooLarge, Found: fmt.Sprintf("a file that unpacks to more than %d times its size", mostExpansion),
			Advice: "if it is a table all the same, unpack it first"}
	}
	if int64(len(p)) > b.left {
		p = p[:b.left]
	}
	n, err := b.r.Read(p)
	b.left -= int64(n)
	return n, err
}
