package export

import (
	"bufio"
	"bytes"
	"fmt"
	"io"
	"os"
)

// sheetParts holds the spooled rows of every sheet, by the sheet's name in the package.
type sheetParts struct{ of map[string]*spool }

// spool opens the spool of a sheet.
func (p *sheetParts) spool(sheetID int) (*spool, error) {
	file, err := os.CreateTemp("", "tripwell-sheet-")
	if err != nil {
		return nil, fmt.Errorf("temporary file for rows: %w", err)
	}
	if p.of == nil {
		p.of = map[string]*spool{}
	}
	s := &spool{file: file, out: bufio.NewWriterSize(file, 1<<16)}
	p.of[fmt.Sprintf("xl/worksheets/sheet%d.xml", sheetID)] = s
	return s, nil
}

// remove closes and removes the spools.
func (p *sheetParts) remove() {
	for _, s := range p.of {
		s.file.Close()
		os.Remove(s.file.Name())
	}
}

// spool keeps rows as XML in a temporary file until their sheet is zipped: a sheet can be larger than memory, and three
// of them grow at once.
type spool struct {
	file *os.File
	out  *bufio.Writer
}

// row adds a row of cells, in which rowMark stands for its number.
func (s *spool) row(number, cells []byte) error {
	// bufio.Writer keeps its first error; the last write tells it.
	s.out.WriteString(`<row r="`)
	s.out.Write(number)
	s.out.WriteString(`">`)
	for {
		i := bytes.IndexByte(cells, rowMark)
		if i < 0 {
			break
		}
		s.out.Write(cells[:i])
		s.out.Write(number)
		cells = cells[i+1:]
	}
	s.out.Write(cells)
	_, err := s.out.WriteString(`</row>`)
	return err
}

// copyTo writes all rows to the sheet.
func (s *spool) copyTo(w io.Writer) error {
	if err := s.out.Flush(); err != nil {
		return fmt.Errorf("temporary file for rows: %w", err)
	}
	if _, err := s.file.Seek(0, io.SeekStart); err != nil {
		return fmt.Errorf("temporary file for rows: %w", err)
	}
	_, err := io.Copy(w, s.file)
	return err
}
