package bundle

import (
	"archive/zip"
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"tripwell/store"
)

// Bounds of a bundle that is read: it comes from whoever is being audited.
const (
	filesMost    = 500_000
	fileMost     = 16 << 30 // unpacked bytes of one file
	allMost      = 64 << 30 // of all
	jsonMost     = 128 << 20
	valuesMost   = 3_000_000 // commas of one JSON file: what it takes in memory goes by them
	lineMost     = 1 << 20
	lineLeast    = 16    // packed bytes of a record: its id is as good as random
	ratioMost    = 1_500 // deflate makes at most about 1,030 bytes of one
	ratioMatters = 1 << 20
)

// reader is an opened bundle.
type reader struct {
	doc   Doc
	files map[string]*zip.File
	most  int64 // lines a file of it may have
}

// open reads the list of files and bundle.json. A file that is no bundle is *store.Error code invalid.
func open(in io.ReaderAt, size int64) (*reader, error) {
	archive, err := zip.NewReader(in, size)
	if err != nil {
		return nil, notABundle("it is no zip file, or it was cut off (" + err.Error() + ")")
	}
	if len(archive.File) > filesMost {
		return nil, notABundle("it holds more than 500,000 files")
	}
	r := &reader{files: make(map[string]*zip.File, len(archive.File)), most: size/lineLeast + 1000}
	all := uint64(0)
	for _, f := range archive.File {
		if !filepath.IsLocal(f.Name) || strings.ContainsAny(f.Name, "\\:") {
			return nil, notABundle("its file " + quote(f.Name) + " would be unpacked outside its folder")
		}
		if f.UncompressedSize64 > fileMost || f.UncompressedSize64 > ratioMatters && f.UncompressedSize64/ratioMost > f.CompressedSize64 {
			return nil, notABundle("its file " + quote(f.Name) + " says it is too large to be true")
		}
		if all += f.UncompressedSize64; all > allMost {
			return nil, notABundle("its files say that they are larger than 64 GiB together")
		}
		if r.files[f.Name] != nil {
			return nil, notABundle("it holds the file " + quote(f.Name) + " twice")
		}
		if !strings.HasSuffix(f.Name, "/") {
			r.files[f.Name] = f
		}
	}
	if r.files[docFile] == nil {
		return nil, notABundle("it holds no " + docFile)
	}
	if err := r.json(docFile, &r.doc); err != nil {
		return nil, notABundle(err.Error())
	}
	if r.doc.Tripwell != "bundle" {
		return nil, notABundle("its " + docFile + " says that it is something else")
	}
	if r.doc.V != 1 {
		return nil, &store.Error{Code: "invalid", Field: "bundle", Text: fmt.Sprintf("The bundle has version %d; this program reads version 1. Use a newer program.", r.doc.V)}
	}
	return r, nil
}

func notABundle(why string) error {
	return &store.Error{Code: "invalid", Field: "bundle", Text: "The file is no bundle: " + why + ". Ask for it again, or name the zip file that was written as a bundle."}
}

func quote(name string) string {
	if len(name) > 120 {
		name = name[:120] + "…"
	}
	return fmt.Sprintf("%q", name)
}

// read gives a file's bytes, at most so many.
func (r *reader) read(name string, most int64) ([]byte, error) {
	f := r.files[name]
	if f == nil {
		return nil, fmt.Errorf("the file %s is missing", name)
	}
	in, err := f.Open()
	if err != nil {
		return nil, fmt.Errorf("the file %s cannot be unpacked: %w", name, err)
	}
	defer in.Close()
	b, err := io.ReadAll(io.LimitReader(in, most+1))
	if err != nil {
		return nil, fmt.Errorf("the file %s cannot be unpacked: %w", name, err)
	}
	if int64(len(b)) > most {
		return nil, fmt.Errorf("the file %s is larger than %d bytes", name, most)
	}
	return b, nil
}

func (r *reader) json(name string, to any) error {
	b, err := r.read(name, jsonMost)
	if err != nil {
		return err
	}
	if bytes.Count(b, []byte(",")) > valuesMost {
		return fmt.Errorf("the file %s holds more than %d values", name, valuesMost)
	}
	if err := json.Unmarshal(b, to); err != nil {
		return fmt.Errorf("the file %s cannot be read: %w", name, err)
	}
	return nil
}

// sum gives a file's SHA-256.
func (r *reader) sum(name string) (string, error) {
	in, err := r.files[name].Open()
	if err != nil {
		return "", err
	}
	defer in.Close()
	h := sha256.New()
	if _, err := io.Copy(h, io.LimitReader(in, fileMost)); err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

// lines gives the lines of a file one by one, without their ends. The bytes are good until the next is asked for.
func (r *reader) lines(name string, line func(b []byte) error) error {
	f := r.files[name]
	if f == nil {
		return fmt.Errorf("the file %s is missing", name)
	}
	in, err := f.Open()
	if err != nil {
		return fmt.Errorf("the file %s cannot be unpacked: %w", name, err)
	}
	defer in.Close()
	scan := bufio.NewScanner(in)
	scan.Buffer(make([]byte, 128<<10), lineMost)
	scan.Split(wholeLines)
	for n := int64(0); scan.Scan(); n++ {
		if n == r.most {
			return fmt.Errorf("the file %s has more lines than there can be records in a bundle of this size", name)
		}
		if err := line(scan.Bytes()); err != nil {
			return err
		}
	}
	if err := scan.Err(); err != nil {
		if errors.Is(err, bufio.ErrTooLong) {
			return fmt.Errorf("the file %s has a line of more than %d bytes", name, lineMost)
		}
		return fmt.Errorf("the file %s cannot be unpacked: %w", name, err)
	}
	return nil
}

// wholeLines splits at line feeds only: a carriage return belongs to the bytes that are proved.
func wholeLines(data []byte, end bool) (advance int, token []byte, err error) {
	for i, b := range data {
		if b == '\n' {
			return i + 1, data[:i], nil
		}
	}
	if end && len(data) > 0 {
		return len(data), data, nil
	}
	return 0, nil, nil
}
