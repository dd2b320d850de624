package store

import (
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// Files of DIR/keys (0700; each 0600): the signing key, its public half, and the last head that was signed. They are no
// part of a backup of the book.
const (
	keysDir  = "keys"
	keyFile  = "head.key"
	pubFile  = "head.pub"
	headFile = "head.json"
)

// signedHead is the small file that remembers what this store once signed.
type signedHead struct {
	Epoch int       `json:"epoch"`
	Logs  []LogHead `json:"logs"`
	Note  string    `json:"note"`
}

// SignedHead signs the present head and keeps it before it hands it out; a store that is shorter than, or other than,
// what it once signed returns *Error code conflict and signs nothing.
func (s *Store) SignedHead() (string, error) {
	s.heads.Lock()
	defer s.heads.Unlock()
	head := proof.Head{Origin: fmt.Sprintf("tripwell/%s/%s/%d", s.org, s.id, s.epoch)}
	var logs []LogHead
	var seq uint64
	err := s.view(func(tx *bbolt.Tx) (err error) {
		if err := s.agreesWithSigned(tx); err != nil {
			return err
		}
		logs, err = logHeads(tx)
		if err != nil {
			return err
		}
		key, v := tx.Bucket(bktRec).Cursor().Last()
		seq = readKey64(key)
		k, err := readRec(v)
		if err != nil {
			return fmt.Errorf("last record: %w", err)
		}
		st, err := record.ParseStamp(k.stamp)
		head.Time = st.Received
		return err
	})
	if err != nil {
		return "", err
	}
	for _, l := range logs {
		root, err := proof.ParseHash(l.Root)
		if err != nil {
			return "", fmt.Errorf("head of %s: %w", l.Log, err)
		}
		head.Logs = append(head.Logs, proof.LogRoot{Log: l.Log, Size: l.Size, Root: root})
	}
	key, err := s.signingKey()
	if err != nil {
		return "", err
	}
	note, err := head.Sign(key)
	if err != nil {
		return "", fmt.Errorf("sign head: %w", err)
	}
	kept, err := json.MarshalIndent(signedHead{s.epoch, logs, note}, "", " ")
	if err != nil {
		return "", fmt.Errorf("keep head: %w", err)
	}
	if err := s.WriteKey(headFile, kept); err != nil {
		return "", err
	}
	return note, s.keepHead(seq, note)
}

// agreesWithSigned holds the book against what was signed last: each log at least as long, with the same root at that
// length. Heads of an earlier epoch are left to whoever verifies across a restore.
func (s *Store) agreesWithSigned(tx *bbolt.Tx) error {
	raw, err := os.ReadFile(filepath.Join(s.dir, keysDir, headFile))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return fmt.Errorf("read last head: %w", err)
	}
	var last signedHead
	if err := json.Unmarshal(raw, &last); err != nil {
		return &Error{Code: "conflict", Text: "The file keys/head.json, which remembers the last signed head, is damaged. Nothing is signed until it is put back from a copy of the folder keys."}
	}
	if last.Epoch != s.epoch {
		return nil
	}
	for _, l := range last.Logs {
		v := tx.Bucket(bktLogs).Get([]byte(l.Log))
		if v == nil {
			return shorter(l, 0)
		}
		ord, edge, err := readLog(v)
		if err != nil {
			return fmt.Errorf("log %s: %w", l.Log, err)
		}
		if edge.Size < l.Size {
			return shorter(l, edge.Size)
		}
		root, err := proof.Root(l.Size, storedHashes(tx, ord))
		if err != nil {
			return fmt.Errorf("log %s: %w", l.Log, err)
		}
		if root.String() != l.Root {
			return &Error{Code: "conflict", Field: l.Log, Text: fmt.Sprintf("The first %d records of log %s are not those this store once signed. Nothing is signed: put back the file that belongs to the folder keys, or restore a backup.", l.Size, l.Log)}
		}
	}
	return nil
}

func shorter(l LogHead, size int64) error {
	return &Error{Code: "conflict", Field: l.Log, Text: fmt.Sprintf("Log %s holds %d records; this store once signed %d. Nothing is signed: the file is older than what it signed. Restore a newer backup, or tell those who hold the later head.", l.Log, size, l.Size)}
}

// storedHashes serves a log's tree from its leaves.
func storedHashes(tx *bbolt.Tx, ord uint32) proof.Stored {
	leaves := tx.Bucket(bktLog)
	return func(n int64) ([]proof.Hash, error) {
		v := leaves.Get(logKey(ord, n+1))
		if len(v) < 40 {
			return nil, fmt.Errorf("leaf %d is not there", n)
		}
		var h []proof.Hash
		for v = v[8:]; len(v) >= 32; v = v[32:] {
			h = append(h, proof.Hash(v[:32]))
		}
		return h, nil
	}
}

// HeadKey gives the public half of the signing key, for whoever verifies; made when first asked for.
func (s *Store) HeadKey() (string, error) {
	s.heads.Lock()
	defer s.heads.Unlock()
	if _, err := s.signingKey(); err != nil {
		return "", err
	}
	b, err := os.ReadFile(filepath.Join(s.dir, keysDir, pubFile))
	if err != nil {
		return "", fmt.Errorf("read public key: %w", err)
	}
	return strings.TrimSpace(string(b)), nil
}

func (s *Store) signingKey() (string, error) {
	b, err := os.ReadFile(filepath.Join(s.dir, keysDir, keyFile))
	if err == nil {
		return strings.TrimSpace(string(b)), nil
	}
	if !errors.Is(err, fs.ErrNotExist) {
		return "", fmt.Errorf("read signing key: %w", err)
	}
	private, public, err := proof.NewKey(rand.Reader, "tripwell/"+s.org+"/"+s.id)
	if err != nil {
		return "", fmt.Errorf("make signing key: %w", err)
	}
	if err := s.WriteKey(pubFile, []byte(public+"\n")); err != nil {
		return "", err
	}
	return private, s.WriteKey(keyFile, []byte(private+"\n"))
}

// KeysDir is the folder of what must not be read by others: DIR/keys, mode 0700.
func (s *Store) KeysDir() string { return filepath.Join(s.dir, keysDir) }

// WriteKey writes a file of DIR/keys whole or not at all, on the disk before it returns.
func (s *Store) WriteKey(name string, content []byte) error {
	dir := s.KeysDir()
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return fmt.Errorf("keep %s: %w", name, err)
	}
	f, err := os.CreateTemp(dir, name+".new-*") // 0600
	if err != nil {
		return fmt.Errorf("keep %s: %w", name, err)
	}
	defer os.Remove(f.Name()) // gone already when all went well
	_, err = f.Write(content)
	if err := errors.Join(err, f.Sync(), f.Close()); err != nil {
		return fmt.Errorf("keep %s: %w", name, err)
	}
	if err := os.Rename(f.Name(), filepath.Join(dir, name)); err != nil {
		return fmt.Errorf("keep %s: %w", name, err)
	}
	return syncDir(dir)
}
