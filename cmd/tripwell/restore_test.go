package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"image"
	"image/png"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"tripwell/store"
)

// From a store with a photo to a backup, and from the backup to another folder: by the commands alone, beside a running server and
// without one.
func TestRestore_ABackupWithPhotosOnAnotherMachine(t *testing.T) {
	dir, away := emptyStore(t), t.TempDir()
	var picture bytes.Buffer
	if err := png.Encode(&picture, image.NewGray(image.Rect(0, 0, 8, 8))); err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256(picture.Bytes())
	name := hex.EncodeToString(sum[:])
	if _, err := store.PutPhoto(filepath.Join(dir, store.PhotosDir), name, picture.Bytes()); err != nil {
		t.Fatal(err)
	}
	file, photos := filepath.Join(away, "copy.db"), filepath.Join(away, "photos")
	running := start(t, "serve", "--listen", "127.0.0.1:0", "--data", dir)
	for _, want := range []string{"Photos: 1 copied to " + photos + ", 0 were there.", "Photos: 0 copied to " + photos + ", 1 were there."} {
		if out, wrong, code := tripwell(t, "", "backup", "-o", file, "--photos", photos, "--data", dir); code != 0 || !strings.Contains(out, want) {
			t.Fatalf("backup: exit %d, %s %s, want %q", code, out, wrong, want)
		}
	}
	if _, wrong, code := tripwell(t, "", "restore", file, "--data", dir); code != 1 || !strings.Contains(wrong, "Stop it first") {
		t.Errorf("beside a server: exit %d, %q, want 1 and what to do", code, wrong)
	}
	if err := running.stop(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	fresh := filepath.Join(t.TempDir(), "fresh")
	out, wrong, code := tripwell(t, "", "restore", file, "--photos", photos, "--data", fresh)
	if code != 0 || !strings.Contains(out, "as epoch 2") || !strings.Contains(out, "Photos: 1 copied, 0 were there.") || !strings.Contains(out, "no signing key") {
		t.Fatalf("restore: exit %d, %s %s", code, out, wrong)
	}
	if raw, err := os.ReadFile(store.PhotoFile(filepath.Join(fresh, store.PhotosDir), name)); err != nil || !bytes.Equal(raw, picture.Bytes()) {
		t.Errorf("the photo is not there: %v", err)
	}
	if out, wrong, code := tripwell(t, "", "check", "--data", fresh); code != 0 {
		t.Errorf("check of what was restored: exit %d, %s %s", code, out, wrong)
	}
	// A photo that went bad is named, in the folder it is taken from and on the server's disk.
	if err := os.WriteFile(store.PhotoFile(photos, name), []byte("bad"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, wrong, code := tripwell(t, "", "restore", file, "--photos", photos, "--data", fresh); code != 1 || !strings.Contains(wrong, name) {
		t.Errorf("a damaged photo: exit %d, %q, want 1 and its name", code, wrong)
	}
	if err := os.WriteFile(store.PhotoFile(filepath.Join(fresh, store.PhotosDir), name), []byte("bad"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, wrong, code := tripwell(t, "", "backup", "-o", file, "--photos", photos, "--data", fresh); code != 1 || !strings.Contains(wrong, name) {
		t.Errorf("a photo damaged on the server's disk: exit %d, %q, want 1 and its name", code, wrong)
	}
	s, err := store.Open(fresh, store.Options{Now: time.Now})
	if err != nil {
		t.Fatal(err)
	}
	if s.Epoch() != 3 {
		t.Errorf("got epoch %d after two restores, want 3", s.Epoch())
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
}
