package bundle

import (
	"errors"
	"io"

	"tripwell/store"
)

// endings are those of the files that records name, by kind.
var endings = map[string]string{"image/jpeg": ".jpg", "image/png": ".png", "application/pdf": ".pdf"}

// folderOf is where a file that a record names lies in a bundle.
func folderOf(f store.NamedFile) string {
	if f.Certificate {
		return "certificates/"
	}
	return "photos/"
}

// namedFiles writes the photos and certificates that records name, each once; those that are not here are listed.
func (w *writer) namedFiles() error {
	seen := map[string]bool{}
	w.doc.NoPhotos, w.doc.NoFiles = []string{}, []string{}
	for _, f := range w.files {
		if seen[folderOf(f)+f.Name] {
			continue
		}
		seen[folderOf(f)+f.Name] = true
		raw, kind, err := w.namedFile(f)
		var missing *store.Error
		switch {
		case errors.As(err, &missing) && f.Certificate:
			w.doc.NoFiles = append(w.doc.NoFiles, f.Name)
			continue
		case errors.As(err, &missing):
			w.doc.NoPhotos = append(w.doc.NoPhotos, f.Name)
			continue
		case err != nil:
			return err
		}
		if err := w.file(folderOf(f)+f.Name+endings[kind], func(out io.Writer) error { _, err := out.Write(raw); return err }); err != nil {
			return err
		}
	}
	return nil
}

func (w *writer) namedFile(f store.NamedFile) (raw []byte, kind string, err error) {
	if f.Certificate {
		raw, kind, _, err = w.view.CertificateFile(f.Record)
		return raw, kind, err
	}
	return w.view.Photo(f.Record, f.Name)
}
