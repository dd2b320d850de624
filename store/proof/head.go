package proof

import (
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"

	"golang.org/x/mod/sumdb/note"
	"golang.org/x/mod/sumdb/tlog"
)

// LogRoot is how long a log is and the root of its tree.
type LogRoot struct {
	Log  string
	Size int64
	Root Hash
}

// Head says what a whole store holds. As a note its text is:
//
//	tripwell/ORG/STORE/EPOCH
//	NUMBER OF LOGS
//	ROOT (base64) of a tree over the lines "LOG SIZE ROOT", sorted by log
//	TIME the last record was received, RFC 3339 UTC with milliseconds
type Head struct {
	Origin string
	Time   time.Time
	Logs   []LogRoot
}

const headTime = "2006-01-02T15:04:05.000Z"

// Root gives the root over all logs.
func (h Head) Root() Hash {
	var e Edge
	for _, line := range h.lines() {
		e.Append(LeafHash([]byte(line)))
	}
	return e.Root()
}

func (h Head) lines() []string {
	lines := make([]string, len(h.Logs))
	for i, l := range h.Logs {
		lines[i] = fmt.Sprintf("%s %d %s", l.Log, l.Size, l.Root)
	}
	slices.Sort(lines)
	return lines
}

func (h Head) text() string {
	return fmt.Sprintf("%s\n%d\n%s\n%s\n", h.Origin, len(h.Logs), h.Root(), h.Time.UTC().Format(headTime))
}

// Sign gives the head as a signed note.
func (h Head) Sign(private string) (string, error) {
	signer, err := note.NewSigner(private)
	if err != nil {
		return "", fmt.Errorf("signing key: %w", err)
	}
	msg, err := note.Sign(&note.Note{Text: h.text()}, signer)
	return string(msg), err
}

// Verify reads a signed head and holds it against a public key and against the logs it is said to cover.
func Verify(signed, public string, logs []LogRoot) (Head, error) {
	v, err := note.NewVerifier(public)
	if err != nil {
		return Head{}, fmt.Errorf("public key: %w", err)
	}
	n, err := note.Open([]byte(signed), note.VerifierList(v))
	if err != nil {
		return Head{}, fmt.Errorf("signature of the head: %w", err)
	}
	f := strings.Split(n.Text, "\n")
	if len(f) != 5 {
		return Head{}, fmt.Errorf("the head has %d lines, not 4", len(f)-1)
	}
	h := Head{Origin: f[0], Logs: logs}
	if h.Time, err = time.Parse(headTime, f[3]); err != nil {
		return Head{}, fmt.Errorf("time of the head: %w", err)
	}
	if f[1] != strconv.Itoa(len(logs)) {
		return Head{}, fmt.Errorf("the head covers %s logs; %d were given", f[1], len(logs))
	}
	if got := h.Root().String(); got != f[2] {
		return Head{}, fmt.Errorf("the logs give the root %s; the head says %s", got, f[2])
	}
	return h, nil
}

// NewKey makes a signing key and its public half for a name without spaces and plus signs.
func NewKey(random io.Reader, name string) (private, public string, err error) {
	return note.GenerateKey(random, name)
}

// ParseHash reads a hash in base64.
func ParseHash(s string) (Hash, error) { return tlog.ParseHash(s) }
