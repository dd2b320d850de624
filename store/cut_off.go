package store

import (
	"encoding/binary"
	"fmt"
	"io"
	"os"
	"path/filepath"
)

// Where bbolt's two meta pages say how long the file must be (its page header has 16 bytes; then magic, version, page size,
// flags, root bucket 16, free list, number of pages, transaction).
const (
	boltMagic   = 0xED0CDAED
	metaStart   = 16
	metaPages   = metaStart + 40
	metaTx      = metaStart + 48
	metaEnd     = metaStart + 64
	anyPageSize = 512 // the second meta page stands at the page size, which the first names
)

// notCutOff refuses a file that is shorter than it says itself: the library maps it and would end the whole program at the
// first page that is not there. What else is wrong with a file, opening it tells.
func notCutOff(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return nil // opening it tells why
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil
	}
	first, ok := readMeta(f, 0)
	if !ok || first.pageSize < anyPageSize {
		return nil
	}
	last := first
	if second, ok := readMeta(f, int64(first.pageSize)); ok && second.tx > first.tx {
		last = second
	}
	if want := int64(last.pages) * int64(last.pageSize); info.Size() < want {
		return &Error{Code: "unavailable", Field: "data", Text: fmt.Sprintf("The store in %s is cut off: its file has %d bytes of %d. Restore it from a backup.", filepath.Dir(path), info.Size(), want)}
	}
	return nil
}

type boltMeta struct {
	pageSize  uint32
	pages, tx uint64
}

func readMeta(f io.ReaderAt, at int64) (m boltMeta, ok bool) {
	var b [metaEnd]byte
	if _, err := f.ReadAt(b[:], at); err != nil || binary.NativeEndian.Uint32(b[metaStart:]) != boltMagic {
		return m, false
	}
	return boltMeta{binary.NativeEndian.Uint32(b[metaStart+8:]), binary.NativeEndian.Uint64(b[metaPages:]), binary.NativeEndian.Uint64(b[metaTx:])}, true
}
