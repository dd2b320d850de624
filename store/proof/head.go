package proof

import (
	"crypto/sha256"
	"encoding/hex"
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

func (l LogRoot) line() string { return fmt.Sprintf("%s %d %s", l.Log, l.Size, l.Root) }

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
		lines[i] = l.line()
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

// Signed is what a signed head says once its signature has been checked.
type Signed struct {
	Origin string
	Logs   int64 // how many logs it covers
	Root   Hash  // over the lines of all logs
	Time   time.Time
}

// Open reads a signed head and holds its signature against a public key.
func Open(signed, public string) (Signed, error) {
	v, err := note.NewVerifier(strings.TrimSpace(public))
	if err != nil {
		return Signed{}, fmt.Errorf("public key: %w", err)
	}
	n, err := note.Open([]byte(signed), note.VerifierList(v))
	if err != nil {
		return Signed{}, fmt.Errorf("signature of the head: %w", err)
	}
	f := strings.Split(n.Text, "\n")
	if len(f) != 5 {
		return Signed{}, fmt.Errorf("the head has %d lines, not 4", len(f)-1)
	}
	s := Signed{Origin: f[0]}
	if s.Logs, err = strconv.ParseInt(f[1], 10, 64); err != nil || s.Logs < 0 {
		return Signed{}, fmt.Errorf("the head covers %q logs", f[1])
	}
	if s.Root, err = ParseHash(f[2]); err != nil {
		return Signed{}, fmt.Errorf("root of the head: %w", err)
	}
	if s.Time, err = time.Parse(headTime, f[3]); err != nil {
		return Signed{}, fmt.Errorf("time of the head: %w", err)
	}
	return s, nil
}

// Verify reads a signed head and holds it against a public key and against all the logs it is said to cover.
func Verify(signed, public string, logs []LogRoot) (Head, error) {
	s, err := Open(signed, public)
	if err != nil {
		return Head{}, err
	}
	h := Head{Origin: s.Origin, Time: s.Time, Logs: logs}
	if s.Logs != int64(len(logs)) {
		return Head{}, fmt.Errorf("the head covers %d logs; %d were given", s.Logs, len(logs))
	}
	if got := h.Root(); got != s.Root {
		return Head{}, fmt.Errorf("the logs give the root %s; the head says %s", got, s.Root)
	}
	return h, nil
}

// Line proves that a head covers a log at a size, without naming the head's other logs.
type Line struct {
	LogRoot
	Index int64 // of the line among the head's, from 0
	Proof []Hash
}

// Line gives the proof of one log's line.
func (h Head) Line(log string) (Line, error) {
	lines, err := h.Lines()
	if err != nil {
		return Line{}, err
	}
	line, ok := lines[log]
	if !ok {
		return Line{}, fmt.Errorf("the head covers no log %s", log)
	}
	return line, nil
}

// Lines gives the proofs of all logs' lines, by log.
func (h Head) Lines() (map[string]Line, error) {
	sorted := slices.SortedFunc(slices.Values(h.Logs), func(a, b LogRoot) int { return strings.Compare(a.line(), b.line()) })
	var stored [][]Hash
	var e Edge
	for _, l := range sorted {
		stored = append(stored, e.Append(LeafHash([]byte(l.line()))))
	}
	out := make(map[string]Line, len(sorted))
	for i, l := range sorted {
		p, err := Inclusion(e.Size, int64(i), func(n int64) ([]Hash, error) { return stored[n], nil })
		if err != nil {
			return nil, err
		}
		out[l.Log] = Line{l, int64(i), p}
	}
	return out, nil
}

// Covers holds a line against the head's root.
func (s Signed) Covers(l Line) error {
	return CheckInclusion(l.Proof, s.Logs, s.Root, l.Index, LeafHash([]byte(l.line())))
}

// Fingerprint of a public key: SHA-256 over its text in hexadecimal, in groups of eight, to be read out or compared on paper.
func Fingerprint(public string) string {
	sum := sha256.Sum256([]byte(strings.TrimSpace(public)))
	text := ""
	for i := 0; i < len(sum); i += 4 {
		if i > 0 {
			text += " "
		}
		text += hex.EncodeToString(sum[i : i+4])
	}
	return text
}

// NewKey makes a signing key and its public half for a name without spaces and plus signs.
func NewKey(random io.Reader, name string) (private, public string, err error) {
	return note.GenerateKey(random, name)
}

// ParseHash reads a hash in base64.
func ParseHash(s string) (Hash, error) { return tlog.ParseHash(s) }
