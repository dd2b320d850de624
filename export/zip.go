package export

import (
	"archive/zip"
	"bytes"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"regexp"
	"slices"

	"github.com/klauspost/compress/flate"
	"github.com/xuri/excelize/v2"
)

// deflateLevel trades size for time. Level 5 of this compressor packs sheet XML about as small as the standard
// library's default in less than half the time.
const deflateLevel = 5

// directZip writes the package parts straight to the output, so that the finished file never stands in memory (excelize
// by itself builds the whole archive in a buffer first), and splices the spooled rows into their sheets. The parts
// excelize makes are small, because the rows are not among them; they are held until all are there and written in order
// of their names, since excelize gives them in the order of a map: the same source makes the same bytes.
type directZip struct {
	w     *zip.Writer
	parts *sheetParts
	held  map[string]*bytes.Buffer
	plain bool
}

func newDirectZip(out io.Writer, parts *sheetParts, plain bool) excelize.ZipWriter {
	w := zip.NewWriter(out)
	w.RegisterCompressor(zip.Deflate, func(out io.Writer) (io.WriteCloser, error) {
		return flate.NewWriter(out, deflateLevel)
	})
	return &directZip{w, parts, map[string]*bytes.Buffer{}, plain}
}

func (z *directZip) Create(name string) (io.Writer, error) {
	part := &bytes.Buffer{}
	z.held[name] = part
	return part, nil
}

func (z *directZip) AddFS(files fs.FS) error { return z.w.AddFS(files) }

// Close writes the parts. "[Content_Types].xml" sorts before all others, which is where readers look for it.
func (z *directZip) Close() error {
	for name := range z.parts.of {
		if z.held[name] == nil {
			return fmt.Errorf("zip: the rows of %s found no sheet", name)
		}
	}
	for _, name := range slices.Sorted(maps.Keys(z.held)) {
		method := zip.Deflate
		if z.plain {
			method = zip.Store
		}
		out, err := z.w.CreateHeader(&zip.FileHeader{Name: name, Method: method})
		if err != nil {
			return err
		}
		if err := z.write(out, name); err != nil {
			return err
		}
	}
	return z.w.Close()
}

// write puts the rows of a sheet where its data ends.
func (z *directZip) write(out io.Writer, name string) error {
	part, rows := z.held[name].Bytes(), z.parts.of[name]
	if rows == nil {
		if name == contentTypes {
			part = sortedDefaults(part)
		}
		_, err := out.Write(part)
		return err
	}
	end := bytes.Index(part, []byte("</sheetData>"))
	if end < 0 {
		return fmt.Errorf("zip: the rows of %s found no place in the sheet", name)
	}
	if _, err := out.Write(part[:end]); err != nil {
		return err
	}
	if err := rows.copyTo(out); err != nil {
		return err
	}
	_, err := out.Write(part[end:])
	return err
}

// contentTypes lists the kinds of parts (ECMA-376 part 2, 10.1.2).
const contentTypes = "[Content_Types].xml"

var defaultType = regexp.MustCompile(`<Default [^>]*></Default>`)

// sortedDefaults puts the kinds by file ending in order: for a picture excelize adds them in the order of a map.
func sortedDefaults(part []byte) []byte {
	list := defaultType.FindAll(part, -1)
	sorted := make([][]byte, len(list))
	for i := range list {
		sorted[i] = bytes.Clone(list[i])
	}
	slices.SortFunc(sorted, bytes.Compare)
	n := 0
	return defaultType.ReplaceAllFunc(part, func([]byte) []byte {
		n++
		return sorted[n-1]
	})
}
