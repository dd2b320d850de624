package store

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"image"
	_ "image/jpeg" // the two kinds of picture that are taken
	_ "image/png"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"

	"tripwell/store/record"
)

// Photos lie beside the book, never in it: DIR/photos/AB/SHA256, named by the hash of their bytes. Whether somebody may
// see one is decided by an entry that names it; the hash alone opens nothing.

// Bounds of photos: how many an entry may name, and how large one may be.
const (
	PhotosPerEntry = 4
	PhotoBytes     = 2 << 20
	photoPixels    = 12_000_000 // a phone sends at most 1600 by 1600
)

var errPhotoSealed = &Error{Code: "conflict", Field: "photo", Text: "What this photo belongs to was sealed by the owner of the store, and its photos were removed for good."}

var errNoPhoto = &Error{Code: "not_found", Field: "photo", Text: "This photo has not arrived here, or the entry does not name it. It may still wait on the phone that took it."}

// photosOf gives the names of photos in an entry's body; what is no name is passed over, and a sealed entry shows none.
func photosOf(r *record.Record) []string {
	var body struct {
		Photos jsontext.Value `json:"photos"`
	}
	var said []any
	if json.Unmarshal(r.Body, &body, checked) != nil || len(body.Photos) == 0 || json.Unmarshal(body.Photos, &said) != nil {
		return nil
	}
	var names []string
	for _, v := range said {
		if name, ok := v.(string); ok && isHash(name) && !slices.Contains(names, name) && len(names) < PhotosPerEntry {
			names = append(names, name)
		}
	}
	return names
}

func isHash(s string) bool {
	b, err := hex.DecodeString(s)
	return err == nil && len(b) == sha256.Size && hex.EncodeToString(b) == s
}

// namesPhoto tells whether an entry, or something said of a defect, that somebody may see names a photo.
func (v *View) namesPhoto(id, name string) error {
	r, _, _, _, err := v.recordAt(parseID(id))
	if err != nil {
		return err
	}
	var photos []string
	if strings.HasPrefix(r.Kind, "defect.") {
		photos = photosOf(r)
	} else {
		e, err := v.Entry(id)
		if err != nil {
			return err
		}
		photos = e.Photos
	}
	if r.Sealed != "" {
		return errPhotoSealed
	}
	if !slices.Contains(photos, name) {
		return errNoPhoto
	}
	return nil
}

// KeepPhoto keeps the bytes of a photo that an entry within the scope names. The same photo again changes nothing. Bytes
// that are not what their name says, or no JPEG or PNG of a phone's size, are refused.
func (s *Store) KeepPhoto(sc Scope, entry, name string, raw []byte) error {
	if !isHash(name) {
		return &Error{Code: "invalid", Field: "sha256", Text: "A photo is named by the SHA-256 of its bytes, 64 small hexadecimal digits. Send it under that name."}
	}
	if err := s.View(sc, func(v *View) error { return v.namesPhoto(entry, name) }); err != nil {
		return err
	}
	refused := s.keepPhoto(name, raw)
	if err := s.notePhoto(entry, name, refused); err != nil {
		return err
	}
	return refused
}

func (s *Store) keepPhoto(name string, raw []byte) error {
	if sum := sha256.Sum256(raw); hex.EncodeToString(sum[:]) != name {
		return &Error{Code: "invalid", Field: "sha256", Text: "These bytes are not the photo of that name. Send it again."}
	}
	if err := checkPhoto(raw); err != nil {
		return err
	}
	_, err := PutPhoto(filepath.Join(s.dir, PhotosDir), name, raw)
	return err
}

func checkPhoto(raw []byte) error {
	c, kind, err := image.DecodeConfig(bytes.NewReader(raw))
	switch {
	case err != nil || (kind != "jpeg" && kind != "png"):
		return &Error{Code: "invalid", Field: "photo", Text: "This is no JPEG or PNG picture. Take the photo again."}
	case len(raw) > PhotoBytes || c.Width*c.Height > photoPixels:
		return &Error{Code: "too_large", Field: "photo", Text: "This photo is larger than is taken here. Take it again on the entry's page, which makes it smaller."}
	case tellsMore(raw):
		return errTraces
	}
	return nil
}

// writeWhole puts a file in its place only once all of it is on the disk.
func writeWhole(path string, raw []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), ".new-*")
	if err != nil {
		return fmt.Errorf("keep photo: %w", err)
	}
	defer func() {
		if err != nil {
			err = errors.Join(fmt.Errorf("keep photo: %w", err), os.Remove(f.Name()))
		}
	}()
	if _, err = f.Write(raw); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Sync(); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// Photo gives the bytes of a photo through an entry that names it, and its kind, image/jpeg or image/png. Bytes that went
// bad on the disk are not shown.
func (v *View) Photo(entry, name string) (raw []byte, kind string, err error) {
	if err := v.namesPhoto(entry, name); err != nil {
		return nil, "", err
	}
	if raw, err = v.s.PhotoBytes(name); err != nil {
		return nil, "", err
	}
	if raw[0] == 0x89 { // a PNG begins so
		return raw, "image/png", nil
	}
	return raw, "image/jpeg", nil
}

// HasPhoto tells whether a photo's bytes have arrived.
func (v *View) HasPhoto(name string) bool {
	_, err := os.Stat(v.s.photoPath(name))
	return err == nil
}

func (s *Store) photoPath(name string) string {
	return PhotoFile(filepath.Join(s.dir, PhotosDir), name)
}

// NamedFile is a file beside the book that a record names: a photo of an entry or of a defect, or the certificate of an instrument.
type NamedFile struct {
	Record, Name string
	Certificate  bool
}

// FilesOf gives the files that a record's exact bytes name; most records name none.
func FilesOf(raw []byte) (list []NamedFile) {
	if !bytes.Contains(raw, []byte(`"photos"`)) && !bytes.Contains(raw, []byte(`"instrument.calibrated"`)) {
		return nil
	}
	r, f := record.Reread(raw)
	if f != nil {
		return nil
	}
	switch {
	case strings.HasPrefix(r.Kind, "entry.") || strings.HasPrefix(r.Kind, "defect."):
		for _, name := range photosOf(r) {
			list = append(list, NamedFile{r.ID, name, false})
		}
	case r.Kind == "instrument.calibrated":
		var body struct {
			File string `json:"file"`
		}
		if json.Unmarshal(r.Body, &body, checked) == nil && isHash(body.File) {
			list = append(list, NamedFile{r.ID, body.File, true})
		}
	}
	return list
}
