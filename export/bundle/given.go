package bundle

import (
	"archive/zip"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
)

// given is the workbook of the bundle, once its rows are counted.
type given struct {
	spool *spool
	cells *cells
	sum   string
	rows  map[string]map[uint64]int32 // by the group of its sheet, then by their hash
	most  int                         // different rows it may have
	err   error
}

// A workbook has so many rows for each record at most, and is packed already.
const (
	rowsPerRecord = 60
	rowsBesides   = 200_000
	workbookRatio = 100
)

// read unpacks the workbook and counts its rows.
func (g *given) read(ctx context.Context, f *zip.File) {
	sum, different := sha256.New(), 0
	if f.UncompressedSize64 > ratioMatters && f.UncompressedSize64/workbookRatio > f.CompressedSize64 {
		g.err = errors.New("it says it is too large to be true")
		return
	}
	g.spool, g.err = spooled(func(out io.Writer) error {
		in, err := f.Open()
		if err != nil {
			return err
		}
		defer in.Close()
		_, err = io.Copy(io.MultiWriter(out, sum), io.LimitReader(in, fileMost))
		return err
	})
	if g.err != nil {
		return
	}
	g.sum = hex.EncodeToString(sum.Sum(nil))
	if g.cells, g.err = openCells(g.spool.file, g.spool.size); g.err != nil {
		return
	}
	g.rows = map[string]map[uint64]int32{}
	for _, s := range g.cells.sheets {
		counts := g.rows[groupOf(s.name)]
		if counts == nil {
			counts = map[uint64]int32{}
			g.rows[groupOf(s.name)] = counts
		}
		g.err = g.cells.eachRow(ctx, []sheetPart{s}, func(r sheetRow) error {
			h := hashRow(r.cells)
			if counts[h]++; counts[h] == 1 {
				different++
			}
			if different > g.most {
				return errors.New("it has more rows than its records can give")
			}
			return nil
		})
		if g.err != nil {
			return
		}
	}
}

// groupOf names a sheet and the further sheets that take its rows when it is full.
func groupOf(sheet string) string { return strings.TrimRight(sheet, " 0123456789") }

func (v *verifier) listedSum(name string) string {
	for _, f := range v.doc.Files {
		if f.Name == name {
			return f.SHA256
		}
	}
	return ""
}

// spool is a file in the temp folder.
type spool struct {
	file *os.File
	size int64
}

func spooled(fill func(io.Writer) error) (*spool, error) {
	f, err := os.CreateTemp("", "tripwell-check-*")
	if err != nil {
		return nil, fmt.Errorf("room for the workbook: %w", err)
	}
	s := &spool{file: f}
	if err := fill(f); err != nil {
		s.remove()
		return nil, err
	}
	if s.size, err = f.Seek(0, io.SeekEnd); err != nil {
		s.remove()
		return nil, err
	}
	return s, nil
}

func (s *spool) remove() {
	if s == nil {
		return
	}
	_ = s.file.Close()
	_ = os.Remove(s.file.Name())
}
