package main

import (
	"encoding/json"
	"fmt"
	"io"
	"os"
)

// sheetFlags are what every import of a sheet asks, register or tests.
type sheetFlags struct {
	folder
	author
	File    string `arg:"" placeholder:"FILE" help:"CSV or XLSX file; - reads standard input."`
	Site    string `name:"site" placeholder:"CODE" help:"Site of rows that name none."`
	Dates   string `name:"dates" placeholder:"dmy|mdy" help:"Which comes first in dates such as 03/04/2026: dmy the day, mdy the month."`
	Map     string `name:"map" placeholder:"FILE" help:"JSON that says which heading is which column (see --save-map)."`
	SaveMap string `name:"save-map" placeholder:"FILE" help:"Write down how each column was read, to be corrected and given back with --map."`
	DryRun  bool   `name:"dry-run" help:"Only say what would be done."`
}

// open gives the file to be taken in.
func (f sheetFlags) open(e *env) (io.ReadCloser, error) {
	if f.File == "-" {
		return io.NopCloser(e.stdin), nil
	}
	file, err := os.Open(f.File)
	if err != nil {
		return nil, usageError{fmt.Errorf("cannot read %s: %w", f.File, unwrapPath(err))}
	}
	return file, nil
}

// mapped reads what --map names; nil without one.
func (f sheetFlags) mapped() ([]byte, error) {
	if f.Map == "" {
		return nil, nil
	}
	raw, err := os.ReadFile(f.Map)
	if err != nil {
		return nil, usageError{fmt.Errorf("cannot read %s: %w", f.Map, unwrapPath(err))}
	}
	return raw, nil
}

// saveMap writes how the columns were read, where --save-map asks for it.
func (f sheetFlags) saveMap(e *env, read any) error {
	if f.SaveMap == "" {
		return nil
	}
	return outFile{Output: f.SaveMap}.write(e, func(w io.Writer) error {
		enc := json.NewEncoder(w)
		enc.SetEscapeHTML(false)
		enc.SetIndent("", " ")
		return enc.Encode(read)
	})
}
