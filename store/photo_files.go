package store

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"iter"
	"os"
	"path/filepath"
)

// PhotosDir is the folder of photos in a store's folder. A folder of photos anywhere has the same shape: AB/SHA256, where AB are the
// first two digits of the name.
const PhotosDir = "photos"

// PhotoFile is where a photo lies in a folder of photos.
func PhotoFile(folder, name string) string { return filepath.Join(folder, name[:2], name) }

// PhotoNames gives the names of the photos in a folder of photos, in order; what is no photo's name is passed over. A folder that is
// not there has none.
func PhotoNames(folder string) iter.Seq2[string, error] {
	return func(yield func(string, error) bool) {
		parts, err := os.ReadDir(folder)
		if errors.Is(err, fs.ErrNotExist) {
			return
		}
		if err != nil {
			yield("", fmt.Errorf("list photos: %w", err))
			return
		}
		for _, part := range parts {
			if !part.IsDir() {
				continue
			}
			files, err := os.ReadDir(filepath.Join(folder, part.Name()))
			if err != nil {
				yield("", fmt.Errorf("list photos: %w", err))
				return
			}
			for _, file := range files {
				if name := file.Name(); isHash(name) && name[:2] == part.Name() && !yield(name, nil) {
					return
				}
			}
		}
	}
}

// PutPhoto keeps the bytes of a photo in a folder of photos, whole or not at all. Bytes that are not what the name says are refused
// with *Error code conflict. had: they lay there already.
func PutPhoto(folder, name string, raw []byte) (had bool, err error) {
	if sum := sha256.Sum256(raw); !isHash(name) || hex.EncodeToString(sum[:]) != name {
		return false, &Error{Code: "conflict", Field: "photo", Text: "The photo " + name + " is damaged: its bytes are not what its name says."}
	}
	path := PhotoFile(folder, name)
	if there, err := os.ReadFile(path); err == nil && sha256.Sum256(there) == sha256.Sum256(raw) {
		return true, nil
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
		return false, fmt.Errorf("keep photo: %w", err)
	}
	return false, writeWhole(path, raw)
}

// Photos gives the names of the photos that have arrived.
func (s *Store) Photos() iter.Seq2[string, error] { return PhotoNames(filepath.Join(s.dir, PhotosDir)) }

// PhotoBytes gives the bytes of a photo for a backup; ones that are not what the name says are *Error code conflict.
func (s *Store) PhotoBytes(name string) ([]byte, error) {
	if !isHash(name) {
		return nil, errNoPhoto
	}
	raw, err := os.ReadFile(s.photoPath(name))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, errNoPhoto
	}
	if err != nil {
		return nil, fmt.Errorf("photo %s: %w", name, err)
	}
	if sum := sha256.Sum256(raw); hex.EncodeToString(sum[:]) != name {
		return nil, errPhotoDamaged
	}
	return raw, nil
}

var errPhotoDamaged = &Error{Code: "conflict", Field: "photo", Text: "The file of this photo is damaged on the server's disk. Put it back from a backup."}

// PhotosRestored says what became of the photos of a backup.
type PhotosRestored struct {
	Copied, Had int
	Damaged     []string // names; their bytes are something else
}

// RestorePhotos copies into a store's folder what photos it lacks or holds damaged.
func RestorePhotos(dir, from string) (done PhotosRestored, err error) {
	if _, err := os.Stat(from); err != nil {
		return done, &Error{Code: "not_found", Field: "photos", Text: "The folder of photos cannot be read: " + err.Error() + "."}
	}
	for name, err := range PhotoNames(from) {
		if err != nil {
			return done, err
		}
		raw, err := os.ReadFile(PhotoFile(from, name))
		if err != nil {
			return done, fmt.Errorf("read photo: %w", err)
		}
		had, err := PutPhoto(filepath.Join(dir, PhotosDir), name, raw)
		var e *Error
		switch {
		case errors.As(err, &e):
			done.Damaged = append(done.Damaged, name)
		case err != nil:
			return done, err
		case had:
			done.Had++
		default:
			done.Copied++
		}
	}
	return done, nil
}
