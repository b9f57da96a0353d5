package dataset

import (
	"bytes"
	"compress/gzip"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"
)

func packed(t *testing.T, ending string, text []byte) string {
	t.Helper()
	var b bytes.Buffer
	if ending == ".gz" {
		w := gzip.NewWriter(&b)
		w.Write(text)
		w.Close()
	} else {
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

// TestCompressedRefusals: bombs end early, damage is named.
func TestCompressedRefusals(t *testing.T) {
	bomb := append([]byte("a,b\n"), bytes.Repeat([]byte("1,2\n"), 40<<20)...)
	for _, ending := range []string{".gz", ".zst"} {
		_, err := ReadFile(packed(t, ending, bomb))
		var f *FileError
		if !errors.As(err, &f) || f.Reason != TooLarge {
			t.Errorf("%s: a bomb gives %v", ending, err)
		}
		path := packed(t, ending, []byte("a,b\n1,2\n3,4\n"))
		raw, _ := os.ReadFile(path)
		if err := os.WriteFile(path, raw[:len(raw)-6], 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := ReadFile(path); err == nil || !strings.Contains(err.Error(), "damaged") {
			t.Errorf("%s: a cut file gives %v", ending, err)
		}
		if err := os.WriteFile(path, []byte("a,b\n1,2\n"), 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := ReadFile(path); err == nil || !strings.Contains(err.Error(), "damaged") {
			t.Errorf("%s: plain text under that ending gives %v", ending, err)
		}
	}
}
