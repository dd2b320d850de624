package store

import (
	"context"
	"crypto/rand"
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"go.etcd.io/bbolt"
)

// CodeLife is how long a typed code signs in. It is short because the code is: 40 bits, which only stand as long as
// nobody can try many (the server counts wrong ones).
const CodeLife = 10 * time.Minute

const codeAlphabet = "0123456789ABCDEFGHJKMNPQRSTVWXYZ" // Crockford: no I, L, O, U

var errCode = &Error{Code: "not_found", Field: "link", Text: "This code is used up, out of date or mistyped. Ask a manager for a new one."}

// BareCode reads a code as a person types it: spaces and hyphens dropped, capitals, I and L read as 1, O as 0. It is
// "" where the text is no code at all.
func BareCode(typed string) string {
	bare := strings.Map(func(r rune) rune {
		switch r {
		case ' ', '-', '\u00a0', '\u2011':
			return -1
		case 'I', 'L':
			return '1'
		case 'O':
			return '0'
		}
		return r
	}, strings.ToUpper(strings.TrimSpace(typed)))
	if len(bare) != 8 || strings.Trim(bare, codeAlphabet) != "" {
		return ""
	}
	return bare
}

// NewCode makes a code that a person types to sign in once, within CodeLife; it takes the place of the one before. Only its
// SHA-256 is kept.
func (s *Store) NewCode(person string) (code string, err error) {
	code = crockfordText(8)
	return grouped(code), s.putLink(person, tokenKey(code), link{Until: s.now().Add(CodeLife), Use: linkTyped})
}

// crockfordText draws n characters that cannot be misread.
func crockfordText(n int) string {
	b := make([]byte, n)
	_, _ = rand.Read(b) // never fails (crypto/rand)
	for i := range b {
		b[i] = codeAlphabet[b[i]%32] // 32 divides 256: every character is as likely
	}
	return string(b)
}

// grouped parts a code by hyphens, four characters at a time.
func grouped(code string) string {
	var parts []string
	for ; len(code) > 4; code = code[4:] {
		parts = append(parts, code[:4])
	}
	return strings.Join(append(parts, code), "-")
}

// SpendCode signs in by a typed code, as SpendLink does by a link.
func (s *Store) SpendCode(ctx context.Context, typed string, from Arrival) (session string, err error) {
	from.How = ByCode
	return s.spend(ctx, BareCode(typed), linkTyped, from)
}

// dropCodes deletes a person's earlier codes.
func (g *group) dropCodes(person string) error {
	return g.dropLinks(person, func(l link) bool { return l.Use != linkTyped })
}

// dropLinks deletes a person's links and codes but those that stay.
func (g *group) dropLinks(person string, stays func(l link) bool) error {
	var old [][]byte
	err := g.tx.Bucket(bktLink).ForEach(func(k, v []byte) error {
		var l link
		if err := json.Unmarshal(v, &l); err == nil && l.Person == person && (stays == nil || !stays(l)) {
			old = append(old, append([]byte(nil), k...))
		}
		return nil
	})
	for _, k := range old {
		if err == nil {
			err = g.drop(bktLink, k)
		}
	}
	return err
}

// linkOf reads a link that is good for one use; none stands for another, since only codes need wrong ones counted first.
func (s *Store) linkOf(tx *bbolt.Tx, token, use string) (Person, error) {
	refused := errLink
	switch use {
	case linkTyped:
		refused = errCode
	case linkHalf:
		refused = errHalf
	}
	l, err := readLink(tx, token)
	if err != nil {
		return Person{}, err
	}
	if l.Use != use || !s.now().Before(l.Until) { // also what is not there
		return Person{}, refused
	}
	p, err := readPerson(tx, l.Person)
	if err != nil || !p.mayEnter(s.now()) {
		return Person{}, refused
	}
	return p, nil
}

// readLink reads a link, a code or half a sign-in; one that is not there is good for nothing.
func readLink(tx *bbolt.Tx, token string) (l link, err error) {
	v := tx.Bucket(bktLink).Get(tokenKey(token))
	if v == nil {
		return link{Use: "none"}, nil
	}
	if err := json.Unmarshal(v, &l); err != nil {
		return l, fmt.Errorf("link: %w", err)
	}
	return l, nil
}
