package server

import (
	"errors"
	"fmt"
	"io/fs"
	"net"
	"os"
	"path/filepath"
	"strings"
)

// The owner's socket lies in the store's folder. Systems take about 104 bytes of socket path; where the folder's own is
// longer than maxSocketPath, the socket lies in a folder of its own under the temp folder, and socketAt names it.
const (
	socketName    = "tripwell.sock"
	socketAt      = "tripwell.sock.at"
	maxSocketPath = 100
)

// ListenSocket opens the owner's socket of dir, mode 0600. Only the holder of the store's lock may call it: whatever
// socket lies there is then left over from a process that is gone, and is removed. Closing the listener removes the socket.
func ListenSocket(dir string) (net.Listener, error) {
	abs, err := filepath.Abs(dir)
	if err != nil {
		return nil, fmt.Errorf("owner's socket: %w", err)
	}
	at := filepath.Join(abs, socketAt)
	l := &socket{}
	if err := removeStale(abs, at); err != nil {
		return nil, fmt.Errorf("owner's socket: %w", err)
	}
	path := filepath.Join(abs, socketName)
	if len(path) > maxSocketPath {
		own, err := os.MkdirTemp("", "tripwell-") // mode 0700
		if err != nil {
			return nil, fmt.Errorf("owner's socket: %w", err)
		}
		path = filepath.Join(own, socketName)
		l.leftovers = []string{at, own}
		if err := os.WriteFile(at, []byte(path+"\n"), 0o600); err != nil {
			return nil, fmt.Errorf("owner's socket: %w", err)
		}
	}
	// The folder is open to its owner alone, so nobody else gets in before the mode is set.
	if l.Listener, err = net.Listen("unix", path); err != nil {
		return nil, fmt.Errorf("owner's socket: %w", err)
	}
	if err := os.Chmod(path, 0o600); err != nil {
		return nil, errors.Join(fmt.Errorf("owner's socket: %w", err), l.Close())
	}
	return l, nil
}

func removeStale(dir, at string) error {
	stale := []string{filepath.Join(dir, socketName)}
	if named, err := os.ReadFile(at); err == nil {
		path := strings.TrimSpace(string(named))
		// Only what ListenSocket itself makes is removed, whatever the file says.
		if filepath.Base(path) == socketName && strings.HasPrefix(filepath.Base(filepath.Dir(path)), "tripwell-") {
			stale = append(stale, path, filepath.Dir(path))
		}
		stale = append(stale, at)
	}
	for _, path := range stale {
		if err := os.Remove(path); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}

// socketPath is where the owner's socket of dir would be.
func socketPath(dir string) (string, error) {
	abs, err := filepath.Abs(dir)
	if err != nil {
		return "", err
	}
	named, err := os.ReadFile(filepath.Join(abs, socketAt))
	if err == nil {
		return strings.TrimSpace(string(named)), nil
	}
	if !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	return filepath.Join(abs, socketName), nil
}

// socket removes what lies beside it when it is closed; the socket itself is unlinked by net.
type socket struct {
	net.Listener
	leftovers []string
}

func (l *socket) Close() error {
	err := l.Listener.Close()
	for _, path := range l.leftovers {
		if gone := os.Remove(path); gone != nil && !errors.Is(gone, fs.ErrNotExist) {
			err = errors.Join(err, gone)
		}
	}
	return err
}
