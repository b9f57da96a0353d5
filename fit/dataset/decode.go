package dataset

import (
	"bytes"
	"fmt"
	"strings"
	"unicode/utf16"
	"unicode/utf8"
)

// magics are the first bytes of what is no plain text; gzip, zstd and Parquet are read under their own endings only.
var magics = []struct{ start, name string }{
	{"\x1f\x8b", "a gzip file"},
	{"\x28\xb5\x2f\xfd", "a zstd file"},
	{"BZh", "a bzip2 file"},
	{"\xfd7zXZ\x00", "an xz file"},
	{"PK\x03\x04", "a zip archive or a spreadsheet"},
	{"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "a spreadsheet in an old format"},
	{"PAR1", "a Parquet file"},
	{"%PDF-", "a PDF file"},
	{"\x89PNG", "a picture"},
}

const (
	bomUTF8    = "\xef\xbb\xbf"
	bomLittle  = "\xff\xfe"
	bomBig     = "\xfe\xff"
	bomLittle4 = "\xff\xfe\x00\x00"
	bomBig4    = "\x00\x00\xfe\xff"
)

const asUTF8 = "open it in the program that made it and save it as CSV in UTF-8"

// checkHead refuses, by its first bytes, what is no text, so that a large or endless file is not read first.
func checkHead(name string, head []byte) error {
	for _, m := range magics {
		if bytes.HasPrefix(head, []byte(m.start)) {
			return &FileError{Path: name, Reason: OtherFormat, Found: m.name, Advice: "this version reads CSV and TSV, plain or as .gz or .zst, and .parquet, each under its own ending"}
		}
	}
	for _, bom := range []string{bomLittle4, bomBig4} {
		if bytes.HasPrefix(head, []byte(bom)) {
			return &FileError{Path: name, Reason: NotUTF8, Found: "text in UTF-32", Advice: asUTF8}
		}
	}
	if bytes.HasPrefix(head, []byte(bomLittle)) || bytes.HasPrefix(head, []byte(bomBig)) {
		return nil
	}
	return checkBinary(name, head)
}

// checkBinary refuses text with NUL bytes, and names UTF-16 where every second byte is one.
func checkBinary(name string, head []byte) error {
	at := bytes.IndexByte(head, 0)
	if at < 0 {
		return nil
	}
	var zeros [2]int
	for i, c := range head {
		if c == 0 {
			zeros[i%2]++
		}
	}
	if half := len(head) / 2; half > 1 && max(zeros[0], zeros[1]) > half*3/4 && min(zeros[0], zeros[1]) < half/4 {
		return &FileError{Path: name, Reason: NotUTF8, Found: "what looks like UTF-16 without a byte-order mark", Advice: asUTF8}
	}
	return &FileError{Path: name, Reason: Binary, Found: fmt.Sprintf("a file that is not text (a NUL byte at byte %d)", at+1), Advice: "give the table as CSV or TSV"}
}

// decode returns the text of a file without its byte-order mark, in UTF-8.
func decode(name, content string) (text string, notes []string, err error) {
	little, big := strings.HasPrefix(content, bomLittle), strings.HasPrefix(content, bomBig)
	if little || big {
		text, err := fromUTF16(name, content[2:], big)
		if err == nil && strings.IndexByte(text, 0) >= 0 {
			err = &FileError{Path: name, Reason: Binary, Found: "a file that is not text (a NUL character)", Advice: "give the table as CSV or TSV"}
		}
		return text, []string{"converted from UTF-16 to UTF-8"}, err
	}
	text = strings.TrimPrefix(content, bomUTF8)
	if at := strings.IndexByte(text, 0); at >= 0 {
		return "", nil, &FileError{Path: name, Reason: Binary, Found: fmt.Sprintf("a file that is not text (a NUL byte at byte %d)", len(content)-len(text)+at+1),
			Advice: "give the table as CSV or TSV"}
	}
	if !utf8.ValidString(text) {
		return "", nil, encodingError(name, text)
	}
	return text, nil, nil
}

func fromUTF16(name, content string, big bool) (string, error) {
	if len(content)%2 != 0 {
		return "", &FileError{Path: name, Reason: NotUTF8, Found: "UTF-16 that ends in the middle of a character", Advice: asUTF8}
	}
	units := make([]uint16, len(content)/2)
	for i := range units {
		a, b := uint16(content[2*i]), uint16(content[2*i+1])
		if big {
			a, b = b, a
		}
		units[i] = a | b<<8
	}
	return string(utf16.Decode(units)), nil
}

// encodingError names the first byte that is not UTF-8, its line and its place.
func encodingError(name, text string) error {
	at := 0
	for at < len(text) {
		r, size := utf8.DecodeRuneInString(text[at:])
		if r == utf8.RuneError && size == 1 {
			break
		}
		at += size
	}
	found := fmt.Sprintf("the byte 0x%02X", text[at])
	if text[at] >= 0xA0 {
		found += fmt.Sprintf(" (%q in Latin-1)", rune(text[at]))
	}
	return &LayoutError{Path: name, Line: lineOf(text, at), Character: characterIn(text, at), Reason: NotUTF8, Found: found,
		Expected: "text in UTF-8", Advice: "the file is in Latin-1 or another 8-bit encoding: " + asUTF8}
}

// lineOf counts lines as splitter does.
func lineOf(text string, at int) int {
	before := text[:at]
	return 1 + strings.Count(before, "\n") + strings.Count(before, "\r") - strings.Count(before, "\r\n")
}
