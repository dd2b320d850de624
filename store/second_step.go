package store

import (
	"context"
	"crypto/aes"
	"crypto/cipher"
	"crypto/hmac"
	"crypto/rand"
	"crypto/sha1"
	"crypto/sha256"
	"crypto/subtle"
	"encoding/base32"
	"encoding/binary"
	"errors"
	"fmt"
	"hash"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"time"

	"go.etcd.io/bbolt"
)

// A second step is a code of six digits from a program or token that shares a key with us (RFC 6238: steps of 30 seconds,
// HMAC-SHA-1, which every such program speaks). One step before and after is taken too (RFC 6238 5.2), none twice.
const (
	stepSeconds = 30
	stepDigits  = 6
	stepDrift   = 1
	stepKey     = 20 // bytes: the length of the hash (RFC 4226 4, R6)

	halfLife  = 5 * time.Minute
	halfWrong = 5 // codes tried after one right password
)

// Codes for when the phone with the second step is gone. They carry 120 bits, so a plain hash keeps them (OWASP ASVS 5.0 V6.5.2: 112).
const (
	spareCodes  = 8
	spareLetter = 24
)

// secondStep is a person's. Key is sealed under DIR/keys/second.key, which no backup takes: a copy of the book gives nobody's codes.
type secondStep struct {
	Key   []byte    `json:"key"`
	Since time.Time `json:"since"`
	Used  int64     `json:"used"`  // the newest step that was used
	Codes [][]byte  `json:"codes"` // SHA-256 of the spare codes that are left
}

var errSecond = &Error{Code: "not_found", Field: "code", Text: "This code is not the one of this moment, or was used already. Wait for the next one, or use a spare code."}
var errHalf = &Error{Code: "not_found", Field: "half", Text: "That took too long, or too many codes were wrong. Sign in with your password again."}

// totp is RFC 6238 with the hash of RFC 4226 5.3.
func totp(key []byte, step int64, digits int, newHash func() hash.Hash) string {
	m := hmac.New(newHash, key)
	m.Write(binary.BigEndian.AppendUint64(nil, uint64(step)))
	sum := m.Sum(nil)
	at := sum[len(sum)-1] & 0xf
	n := binary.BigEndian.Uint32(sum[at:]) & 0x7fffffff
	mod := uint32(1)
	for range digits {
		mod *= 10
	}
	return fmt.Sprintf("%0*d", digits, n%mod)
}

// stepOf finds the step whose code was typed: of those around now the one that fits and is newer than any used.
func stepOf(key []byte, typed string, now time.Time, used int64) (step int64, ok bool) {
	middle := now.Unix() / stepSeconds
	for s := middle - stepDrift; s <= middle+stepDrift; s++ {
		if subtle.ConstantTimeCompare([]byte(totp(key, s, stepDigits, sha1.New)), []byte(typed)) == 1 && s > used {
			step, ok = s, true
		}
	}
	return step, ok
}

// spend holds a typed code against the second step and notes it as used.
func (t *secondStep) spend(key []byte, typed string, now time.Time) bool {
	bare := strings.ToUpper(strings.NewReplacer(" ", "", "-", "").Replace(strings.TrimSpace(typed)))
	if len(bare) == stepDigits {
		step, ok := stepOf(key, bare, now, t.Used)
		if ok {
			t.Used = step
		}
		return ok
	}
	sum := sha256.Sum256([]byte(bare))
	for i, kept := range t.Codes {
		if subtle.ConstantTimeCompare(sum[:], kept) == 1 {
			t.Codes = append(t.Codes[:i:i], t.Codes[i+1:]...)
			return true
		}
	}
	return false
}

// OfferSecond draws a key for a second step. It asks for nothing until ConfirmSecond has seen one of its codes.
func (s *Store) OfferSecond(ctx context.Context, p Person) (secretText, address string, err error) {
	key := make([]byte, stepKey)
	_, _ = rand.Read(key) // never fails (crypto/rand)
	sealed, err := s.sealSecond(p.ID, key)
	if err != nil {
		return "", "", err
	}
	err = s.do(ctx, 1, func(g *group) error {
		sec, err := readSecret(g.tx, p.ID)
		if err != nil {
			return err
		}
		if sec.Password == nil {
			return &Error{Code: "conflict", Field: "password", Text: "A second step follows a password. Set one first."}
		}
		if sec.Second != nil {
			return &Error{Code: "conflict", Field: "code", Text: "A second step is on already. Switch it off first, then set it up anew."}
		}
		sec.Offered = sealed
		return g.putJSON(bktSecret, idKey(p.ID), sec)
	})
	if err != nil {
		return "", "", err
	}
	text, address := stepAddress(key, p.Name)
	return text, address, nil
}

// OfferedSecond gives the key that is still to be proved once more, for a page that comes back; ok is false where none is offered.
func (s *Store) OfferedSecond(p Person) (secretText, address string, ok bool, err error) {
	var sec secret
	if err = s.view(func(tx *bbolt.Tx) (err error) { sec, err = readSecret(tx, p.ID); return err }); err != nil || sec.Offered == nil {
		return "", "", false, err
	}
	key, err := s.unsealSecond(p.ID, sec.Offered)
	if err != nil {
		return "", "", false, err
	}
	text, address := stepAddress(key, p.Name)
	return text, address, true, nil
}

// stepAddress gives a key as people type it, and as programs read it from a code on the screen.
func stepAddress(key []byte, name string) (text, address string) {
	text = base32.StdEncoding.WithPadding(base32.NoPadding).EncodeToString(key)
	return text, "otpauth://totp/" + url.PathEscape("Tripwell:"+name) + "?secret=" + text + "&issuer=Tripwell"
}

// ConfirmSecond switches the second step on with a code of the key that was offered, and gives the spare codes, which are kept as
// hashes only and never shown again. All other sessions of the person end.
func (s *Store) ConfirmSecond(ctx context.Context, person, typed, session string) (codes []string, err error) {
	err = s.do(ctx, 1, func(g *group) error {
		sec, err := readSecret(g.tx, person)
		if err != nil {
			return err
		}
		if sec.Offered == nil {
			return &Error{Code: "conflict", Field: "code", Text: "No second step is being set up. Begin again."}
		}
		key, err := s.unsealSecond(person, sec.Offered)
		if err != nil {
			return err
		}
		second := secondStep{Key: sec.Offered, Since: s.now()}
		if len(strings.TrimSpace(typed)) != stepDigits || !second.spend(key, typed, s.now()) {
			return &Error{Code: "invalid", Field: "code", Text: "This is not the code of this moment. Check that the clock of the phone is right, then type the newest one."}
		}
		codes = nil
		for range spareCodes {
			code := crockfordText(spareLetter)
			sum := sha256.Sum256([]byte(code))
			second.Codes = append(second.Codes, sum[:])
			codes = append(codes, grouped(code))
		}
		sec.Second, sec.Offered = &second, nil
		if err := g.putJSON(bktSecret, idKey(person), sec); err != nil {
			return err
		}
		return g.dropSessions(person, func(k []byte) bool { return string(k) == string(tokenKey(session)) })
	})
	return codes, err
}

// EndSecond switches the second step off, with the present password.
func (s *Store) EndSecond(ctx context.Context, person, typed string) error {
	var sec secret
	if err := s.view(func(tx *bbolt.Tx) (err error) { sec, err = readSecret(tx, person); return err }); err != nil {
		return err
	}
	if holds, err := sec.Password.holds(ctx, typed); err != nil {
		return err
	} else if !holds {
		return &Error{Code: "invalid", Field: "current", Text: "This is not your present password."}
	}
	return s.do(ctx, 1, func(g *group) error {
		sec, err := readSecret(g.tx, person)
		if err != nil {
			return err
		}
		if sec.Password != nil && sec.Password.Short {
			return &Error{Code: "conflict", Field: "current", Text: fmt.Sprintf("Your password is shorter than %d characters, which is enough only with a second step. Set a longer one first.", PasswordLeast)}
		}
		sec.Second, sec.Offered = nil, nil
		return g.putJSON(bktSecret, idKey(person), sec)
	})
}

// SecondStep ends what SignIn began: half is what it gave. Wrong codes are counted on the disk; after five the password is asked again.
func (s *Store) SecondStep(ctx context.Context, half, typed string, from Arrival) (session string, err error) {
	from.How = ByPassword
	wrong := false
	session, err = s.signIn(ctx, from, func(g *group) (Person, error) {
		wrong = false
		p, err := s.linkOf(g.tx, half, linkHalf)
		if err != nil {
			return p, err
		}
		sec, err := readSecret(g.tx, p.ID)
		if err != nil || sec.Second == nil {
			return p, errors.Join(err, errHalf)
		}
		key, err := s.unsealSecond(p.ID, sec.Second.Key)
		if err != nil {
			return p, err
		}
		if !sec.Second.spend(key, typed, s.now()) {
			wrong = true
			return p, errSecond
		}
		if err := g.drop(bktLink, tokenKey(half)); err != nil {
			return p, err
		}
		return p, g.putJSON(bktSecret, idKey(p.ID), sec)
	})
	if !wrong {
		return session, err
	}
	return "", s.countWrong(ctx, half)
}

// HalfPerson says whose second step is still to come.
func (s *Store) HalfPerson(half string) (p Person, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		p, err = s.linkOf(tx, half, linkHalf)
		return err
	})
	return p, err
}

// countWrong notes a wrong code; it gives the sentence for it.
func (s *Store) countWrong(ctx context.Context, half string) error {
	says := errSecond
	err := s.do(ctx, 1, func(g *group) error {
		says = errSecond
		l, err := readLink(g.tx, half)
		if err != nil {
			return err
		}
		if l.Wrong++; l.Wrong >= halfWrong {
			says = errHalf
			return g.drop(bktLink, tokenKey(half))
		}
		return g.putJSON(bktLink, tokenKey(half), l)
	})
	if err != nil {
		return err
	}
	return says
}

const secondFile = "second.key"

// secondSeal gives the cipher under which keys of second steps lie in the book's file.
func (s *Store) secondSeal(create bool) (cipher.AEAD, error) {
	name := filepath.Join(s.dir, keysDir, secondFile)
	key, err := os.ReadFile(name)
	if errors.Is(err, fs.ErrNotExist) && create {
		key = make([]byte, 32)
		_, _ = rand.Read(key) // never fails (crypto/rand)
		err = s.WriteKey(secondFile, key)
	}
	if errors.Is(err, fs.ErrNotExist) {
		return nil, &Error{Code: "conflict", Field: "code", Text: "The key that second steps were kept under is gone, as after a restore without it. Sign in by a manager's link and set the second step up anew."}
	}
	if err != nil {
		return nil, fmt.Errorf("key of second steps: %w", err)
	}
	block, err := aes.NewCipher(key)
	if err != nil {
		return nil, fmt.Errorf("key of second steps: %w", err)
	}
	return cipher.NewGCMWithRandomNonce(block)
}

func (s *Store) sealSecond(person string, key []byte) ([]byte, error) {
	seal, err := s.secondSeal(true)
	if err != nil {
		return nil, err
	}
	return seal.Seal(nil, nil, key, idKey(person)), nil
}

func (s *Store) unsealSecond(person string, sealed []byte) ([]byte, error) {
	seal, err := s.secondSeal(false)
	if err != nil {
		return nil, err
	}
	key, err := seal.Open(nil, nil, sealed, idKey(person))
	if err != nil {
		return nil, &Error{Code: "conflict", Field: "code", Text: "The second step cannot be read with the key kept here. Sign in by a manager's link and set it up anew."}
	}
	return key, nil
}
