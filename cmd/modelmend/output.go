package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
	"sort"

	"modelmend/web-output/page"
	"modelmend/web-output/view"
)

// manifestName is the file that is renamed into place last: a folder is valid when every hash in it matches.
const manifestName = "manifest.json"

// manifest lists the files of one run with their SHA-256.
type manifest struct {
	Format string         `json:"format"`
	Files  []manifestFile `json:"files"`
}

type manifestFile struct {
	Name   string `json:"name"`
	SHA256 string `json:"sha256"`
}

// resultsJSON renders the results file; the same comparison gives the same bytes.
func resultsJSON(r *view.Results) ([]byte, error) {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetIndent("", " ")
	if err := enc.Encode(r); err != nil {
		return nil, fmt.Errorf("cannot write the results: %w", err)
	}
	return b.Bytes(), nil
}

// outputs renders every file of a run before anything is written.
func outputs(r *view.Results) (map[string][]byte, error) {
	results, err := resultsJSON(r)
	if err != nil {
		return nil, err
	}
	var html bytes.Buffer
	if err := page.Write(&html, r); err != nil {
		return nil, fmt.Errorf("cannot build the page: %w", err)
	}
	return map[string][]byte{"results.json": results, "index.html": html.Bytes()}, nil
}

// checkFolder refuses a folder that holds files which modelmend did not write.
func checkFolder(dir string) error {
	info, err := os.Stat(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return fmt.Errorf("cannot use the output folder: %w", err)
	}
	if !info.IsDir() {
		return wrongUse("--out %s is a file, not a folder; choose another name", dir)
	}
	entries, err := os.ReadDir(dir)
	if err != nil {
		return fmt.Errorf("cannot use the output folder: %w", err)
	}
	ours := map[string]bool{manifestName: true, "index.html": true, "results.json": true}
	known := len(entries) == 0
	for _, e := range entries {
		if e.Name() == manifestName || isAside(e.Name()) {
			known = true
		}
	}
	for _, e := range entries {
		if !known || !(ours[e.Name()] || isAside(e.Name())) {
			return wrongUse("the folder %s holds %q, which modelmend did not write; choose another folder with --out, or empty it", dir, e.Name())
		}
	}
	return nil
}

const asidePattern = ".modelmend-*.part"

func isAside(name string) bool {
	ok, _ := filepath.Match(asidePattern, name)
	return ok
}

// writeFolder writes each file aside, syncs it and renames it; the manifest comes last. What an interrupted run left aside is
// removed first.
func writeFolder(dir string, files map[string][]byte) error {
	if err := checkFolder(dir); err != nil {
		return err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return fmt.Errorf("cannot make the output folder: %w", err)
	}
	if left, err := filepath.Glob(filepath.Join(dir, asidePattern)); err == nil {
		for _, f := range left {
			os.Remove(f)
		}
	}
	var names []string
	for name := range files {
		names = append(names, name)
	}
	sort.Strings(names)
	m := manifest{Format: "modelmend-manifest"}
	for _, name := range names {
		sum := sha256.Sum256(files[name])
		m.Files = append(m.Files, manifestFile{name, hex.EncodeToString(sum[:])})
		if err := writeWhole(filepath.Join(dir, name), files[name]); err != nil {
			return err
		}
	}
	list, err := json.MarshalIndent(m, "", " ")
	if err != nil {
		return err
	}
	return writeWhole(filepath.Join(dir, manifestName), append(list, '\n'))
}

// writeWhole puts a file into place all at once: written aside in the same folder, synced, renamed.
func writeWhole(path string, content []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), asidePattern)
	if err != nil {
		return fmt.Errorf("cannot write %s: %w", path, err)
	}
	defer func() {
		if err != nil {
			f.Close()
			os.Remove(f.Name())
			err = fmt.Errorf("cannot write %s: %w", path, err)
		}
	}()
	if _, err = f.Write(content); err != nil {
		return err
	}
	if err = f.Chmod(0o644); err != nil {
		return err
	}
	if err = f.Sync(); err != nil {
		return err
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// fileAddress is the address to paste into a browser.
func fileAddress(path string) string {
	abs, err := filepath.Abs(path)
	if err != nil {
		return path
	}
	abs = filepath.ToSlash(abs)
	if len(abs) > 0 && abs[0] != '/' {
		abs = "/" + abs
	}
	return (&url.URL{Scheme: "file", Path: abs}).String()
}
