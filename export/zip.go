package export

import (
	"archive/zip"
	"bytes"
	"fmt"
	"io"
	"io/fs"

	"github.com/klauspost/compress/flate"
	"github.com/xuri/excelize/v2"
)

// deflateLevel trades size for time. Level 5 of this compressor packs sheet XML about as small as the standard
// library's default in less than half the time.
const deflateLevel = 5

// directZip writes the package parts straight to the output, so that the finished file never stands in memory (excelize
// by itself builds the whole archive in a buffer first), and splices the spooled rows into their sheets.
type directZip struct {
	w     *zip.Writer
	parts *sheetParts
}

func newDirectZip(out io.Writer, parts *sheetParts) excelize.ZipWriter {
	w := zip.NewWriter(out)
	w.RegisterCompressor(zip.Deflate, func(out io.Writer) (io.WriteCloser, error) {
		return flate.NewWriter(out, deflateLevel)
	})
	return directZip{w, parts}
}

func (z directZip) Create(name string) (io.Writer, error) {
	out, err := z.w.Create(name)
	if err != nil {
		return nil, err
	}
	if rows := z.parts.of[name]; rows != nil {
		return &splicer{out: out, rows: rows}, nil
	}
	return out, nil
}

func (z directZip) AddFS(files fs.FS) error { return z.w.AddFS(files) }

func (z directZip) Close() error {
	for name, rows := range z.parts.of {
		if !rows.spliced {
			return fmt.Errorf("zip: the rows of %s found no place in the sheet", name)
		}
	}
	return z.w.Close()
}

// splicer passes a sheet through and puts the rows where its data ends.
type splicer struct {
	out  io.Writer
	rows *spool
	held []byte
}

func (s *splicer) Write(p []byte) (int, error) {
	if s.rows.spliced {
		return s.out.Write(p)
	}
	s.held = append(s.held, p...)
	i := bytes.Index(s.held, []byte("</sheetData>"))
	if i < 0 {
		return len(p), nil
	}
	s.rows.spliced = true
	if _, err := s.out.Write(s.held[:i]); err != nil {
		return 0, err
	}
	if err := s.rows.copyTo(s.out); err != nil {
		return 0, err
	}
	if _, err := s.out.Write(s.held[i:]); err != nil {
		return 0, err
	}
	s.held = nil
	return len(p), nil
}
