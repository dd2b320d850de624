package export

import (
	"archive/zip"
	"io"
	"io/fs"

	"github.com/klauspost/compress/flate"
	"github.com/xuri/excelize/v2"
)

// deflateLevel trades size for time. Level 5 of this compressor packs sheet XML about as small as the standard
// library's default in less than half the time.
const deflateLevel = 5

// directZip writes the package parts straight to the output, so that the finished file never stands in memory;
// excelize by itself builds the whole archive in a buffer first.
type directZip struct{ w *zip.Writer }

func newDirectZip(out io.Writer) excelize.ZipWriter {
	w := zip.NewWriter(out)
	w.RegisterCompressor(zip.Deflate, func(out io.Writer) (io.WriteCloser, error) {
		return flate.NewWriter(out, deflateLevel)
	})
	return directZip{w}
}

func (z directZip) Create(name string) (io.Writer, error) { return z.w.Create(name) }
func (z directZip) AddFS(files fs.FS) error               { return z.w.AddFS(files) }
func (z directZip) Close() error                          { return z.w.Close() }
