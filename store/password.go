package store

import (
	"bytes"
	"compress/gzip"
	"context"
	"crypto/rand"
	"crypto/subtle"
	_ "embed" // the list of common passwords
	"fmt"
	"io"
	"slices"
	"strings"
	"sync"
	"time"
	"unicode/utf8"

	"golang.org/x/crypto/argon2"
	"golang.org/x/text/unicode/norm"
)

// How long a password is, in characters. NIST SP 800-63B-4 3.1.1.2: fifteen where it is all that is asked, eight where a
// second step follows (OWASP ASVS 5.0 V6.2.1: eight, fifteen strongly recommended); at least sixty-four must be taken
// (V6.2.9), and nothing is asked of how it is made up (V6.2.5). The upper end bounds the work, not the choice.
const (
	PasswordLeast      = 15
	PasswordLeastTwice = 8
	passwordMost       = 256
)

// The cost of one look at a password: Argon2id with 19 MiB, two passes, one lane (OWASP Password Storage Cheat Sheet; RFC 9106
// for the function). At most hashSlots run at once and at most hashWait long does one stand in line, so that guesses
// can take neither the memory nor the processors of a server whose crews are sending.
const (
	hashMemoryKiB = 19 * 1024
	hashPasses    = 2
	hashBytes     = 32
	saltBytes     = 16
	hashSlots     = 2
	hashWait      = 5 * time.Second
)

var hashSlot = make(chan struct{}, hashSlots)

// password is a hash with all that is needed to try it again.
type password struct {
	Salt   []byte    `json:"salt"`
	Hash   []byte    `json:"hash"`
	Memory uint32    `json:"memory_kib"`
	Passes uint32    `json:"passes"`
	Short  bool      `json:"short,omitempty"` // good only while a second step follows
	Set    time.Time `json:"set"`
}

// hash works out a password's hash under the given salt and cost, when a slot is free.
func (p password) hash(ctx context.Context, typed string) ([]byte, error) {
	ctx, cancel := context.WithTimeout(ctx, hashWait)
	defer cancel()
	select {
	case hashSlot <- struct{}{}:
	case <-ctx.Done():
		return nil, errBusy
	}
	defer func() { <-hashSlot }()
	return argon2.IDKey([]byte(norm.NFKC.String(typed)), p.Salt, p.Passes, p.Memory, 1, hashBytes), nil
}

func newPassword(ctx context.Context, typed string, now time.Time) (password, error) {
	p := password{Salt: make([]byte, saltBytes), Memory: hashMemoryKiB, Passes: hashPasses, Set: now}
	_, _ = rand.Read(p.Salt) // never fails (crypto/rand)
	p.Short = utf8.RuneCountInString(norm.NFKC.String(typed)) < PasswordLeast
	var err error
	p.Hash, err = p.hash(ctx, typed)
	return p, err
}

// holds reports whether typed is the password. It takes as long for a person without one.
func (p *password) holds(ctx context.Context, typed string) (bool, error) {
	if utf8.RuneCountInString(typed) > passwordMost {
		typed = "" // nobody can have set it
	}
	if p == nil {
		_, err := password{Salt: noSalt, Memory: hashMemoryKiB, Passes: hashPasses}.hash(ctx, typed)
		return false, err
	}
	h, err := p.hash(ctx, typed)
	return err == nil && subtle.ConstantTimeCompare(h, p.Hash) == 1, err
}

var noSalt = make([]byte, saltBytes)

// checkPassword says why a password cannot be taken: too short, too long, or among the first that are guessed.
func checkPassword(typed string, least int, name string) error {
	wrong := func(text string) error { return &Error{Code: "invalid", Field: "password", Text: text} }
	typed = norm.NFKC.String(typed)
	n := utf8.RuneCountInString(typed)
	switch {
	case !utf8.ValidString(typed) || strings.ContainsAny(typed, "\x00\r\n"):
		return wrong("The password holds a character that cannot be typed again. Use letters, figures, spaces and signs.")
	case n < least:
		return wrong(fmt.Sprintf("The password needs at least %d characters; this one has %d. A few words one after another are easy to remember.", least, n))
	case n > passwordMost:
		return wrong(fmt.Sprintf("The password may have up to %d characters.", passwordMost))
	case easilyGuessed(typed, name):
		return wrong("This password is among the first that are guessed. Choose other words.")
	}
	return nil
}

// easilyGuessed holds a password against the list, the person's and the program's name, and what repeats itself.
func easilyGuessed(typed, name string) bool {
	bare := strings.ToLower(typed)
	squeezed := strings.ReplaceAll(bare, " ", "")
	for _, word := range []string{strings.ToLower(name), "tripwell", "password"} {
		word = strings.ReplaceAll(word, " ", "")
		if word != "" && strings.Trim(strings.ReplaceAll(squeezed, word, ""), "0123456789!?.,-_@#$*+") == "" {
			return true
		}
	}
	for _, text := range []string{bare, squeezed} {
		if isCommon(text) || isCommon(unit(text)) || len(unit(text)) <= 4 {
			return true
		}
	}
	return false
}

// unit is the shortest text that repeated makes s.
func unit(s string) string {
	for n := 1; n <= len(s)/2; n++ {
		if len(s)%n == 0 && strings.Repeat(s[:n], len(s)/n) == s {
			return s[:n]
		}
	}
	return s
}

//go:embed password_common.gz
var commonPacked []byte

// commonPasswords are those of eight and more characters that people choose most (password_common_LICENSE.txt).
var commonPasswords = sync.OnceValue(func() []string {
	r, err := gzip.NewReader(bytes.NewReader(commonPacked))
	if err != nil {
		panic(err) // part of the program, held by a test
	}
	text, err := io.ReadAll(r)
	if err != nil {
		panic(err)
	}
	return strings.Fields(string(text))
})

func isCommon(s string) bool {
	_, found := slices.BinarySearch(commonPasswords(), s)
	return found
}
