package dataset

import (
	"bytes"
	"compress/gzip"
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"
)

func packed(t *testing.T, ending string, text []byte) string {
	t.Helper()
	var b bytes.Buffer
	switch ending {
	case "":
		b.Write(text)
	case ".gz":
		w := gzip.NewWriter(&b)
		w.Write(text)
		w.Close()
	default:
		w, err := zstd.NewWriter(&b)
		if err != nil {
			t.Fatal(err)
		}
		w.Write(text)
		w.Close()
	}
	path := filepath.Join(t.TempDir(), "t.csv"+ending)
	if err := os.WriteFile(path, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestCompressed: a packed table is the table; the packing is done by the libraries' own writers.
func TestCompressed(t *testing.T) {
	text := "a,b\n" + strings.Repeat("1.5,x\n2,y\n", 2000)
	plain, err := Read(strings.NewReader(text), "t.csv")
	if err != nil {
		t.Fatal(err)
	}
	for _, ending := range []string{".gz", ".zst"} {
		got, err := ReadFile(packed(t, ending, []byte(text)))
		if err != nil {
			t.Fatalf("%s: %v", ending, err)
		}
		if got.Rows != plain.Rows || got.Columns[0].Hi[2] != 1.5 || got.Columns[1].Levels[1] != "y" || got.Hash == plain.Hash {
			t.Errorf("%s: %d rows, hash %s", ending, got.Rows, got.Hash)
		}
	}
}

// refused reads a file whole and in pieces and gives both errors.
func refused(t *testing.T, path string) [2]error {
	t.Helper()
	_, held := ReadFile(path)
	tb, err := OpenInPieces(path, nil, 1<<16)
	if err == nil {
		err = tb.Each(func(*Table) error { return nil })
	}
	if held == nil || err == nil {
		t.Fatalf("%s: held %v, streamed %v", path, held, err)
	}
	return [2]error{held, err}
}

// TestCompressedRefusals: bombs end early, damage is named, whether the file is held or not.
func TestCompressedRefusals(t *testing.T) {
	bomb := append([]byte("a,b\n"), bytes.Repeat([]byte("1,2\n"), 17<<20)...)
	good := []byte("a,b\n" + strings.Repeat("1,2\n3,4\n", 30000))
	for _, ending := range []string{".gz", ".zst"} {
		for _, err := range refused(t, packed(t, ending, bomb)) {
			var f *FileError
			if !errors.As(err, &f) || f.Reason != TooLarge {
				t.Errorf("%s: a bomb gives %v", ending, err)
			}
		}
		path := packed(t, ending, good)
		raw, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		for name, content := range map[string][]byte{"a cut file": raw[:len(raw)-6], "plain text under that ending": []byte("a,b\n1,2\n"),
			"a file with something behind its end": append(raw[:len(raw):len(raw)], "something"...)} {
			if err := os.WriteFile(path, content, 0o600); err != nil {
				t.Fatal(err)
			}
			for _, err := range refused(t, path) {
				if !strings.Contains(err.Error(), "damaged") {
					t.Errorf("%s: %s gives %v", ending, name, err)
				}
			}
		}
		if err := os.WriteFile(path, nil, 0o600); err != nil {
			t.Fatal(err)
		}
		refused(t, path)
		refused(t, packed(t, ending, nil))
	}
}

// TestLargeIsStreamed: the size from which a table is not held, for each kind of file.
func TestLargeIsStreamed(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	var b strings.Builder
	b.WriteString("a,b\n")
	for b.Len() < StreamBytes {
		b.WriteString(strconv.FormatUint(rng.Uint64()>>12, 10) + "," + strconv.FormatUint(rng.Uint64()>>12, 10) + "\n")
	}
	large := []byte(b.String())
	type row struct {
		A int64 `parquet:"a"`
		B int64 `parquet:"b"`
	}
	only := func(n string) bool { return n == "a" }
	rows := make([]row, StreamBytes/16)
	for _, c := range []struct {
		name, path string
		need       func(string) bool
		streamed   bool
	}{
		{"plain", packed(t, "", large), nil, true},
		{"gzip", packed(t, ".gz", large), nil, true},
		{"zstd", packed(t, ".zst", large), nil, true},
		{"a smaller gzip", packed(t, ".gz", large[:bytes.LastIndexByte(large[:PackedBytes], '\n')]), nil, false},
		{"Parquet", writeParquet(t, rows), nil, true},
		{"one column of Parquet", writeParquet(t, rows), only, false},
		{"a smaller Parquet", writeParquet(t, rows[1:]), nil, false},
	} {
		tb, err := Open(c.path, c.need)
		if err != nil {
			t.Fatal(err)
		}
		if tb.Streamed() != c.streamed {
			t.Errorf("%s: streamed %v, want %v", c.name, tb.Streamed(), c.streamed)
		}
	}
}
