package server

import (
	"context"
	"net/http"
	"net/http/httptest"
	"net/url"
	"strings"
	"testing"
	"time"

	"tripwell/store"
	"tripwell/store/record"
)

// FuzzPush gives the decoder of batches anything: a good batch's every byte may be another. It answers a whole error or one
// receipt a record, and what is taken is sound, which the rig checks at the end.
func FuzzPush(f *testing.F) {
	s, err := store.Open(f.TempDir(), store.Options{Now: time.Now, Create: true})
	must(f, err)
	f.Cleanup(func() { _ = s.Close() })
	p, err := s.PutPerson(context.Background(), "", store.Person{Name: "Manager 1", Role: "manager", All: true, Active: true})
	must(f, err)
	token, err := s.Enrol(context.Background(), p.ID, newID())
	must(f, err)
	srv, err := New(s, Options{})
	must(f, err)
	face := srv.Handler()
	for _, seed := range []string{
		`{"protocol":1,"sent":"2026-12-01T07:52:00.000Z","records":[{"record":"{}"}]}`, `{"protocol":1,"sent":"","records":[{"record":"\ud800"},{"record":"\u0000","held":[{"store":"a","received":"b"}]}]}`,
		`{"protocol":1,"sent":"","records":null}`, `{"protocol":1e0,"sent":"x","records":[]}`, `[]`, "{\"protocol\":1,\"sent\":\"\",\"records\":[{\"record\":\"\xff\"}]}", `{"protocol":1,"protocol":1}`, strings.Repeat(`{"records":[`, 40),
	} {
		f.Add([]byte(seed))
	}
	f.Fuzz(func(t *testing.T, body []byte) {
		req := httptest.NewRequest(http.MethodPost, "/exchange/push", strings.NewReader(string(body)))
		req.Header.Set("Authorization", "Bearer "+token)
		w := httptest.NewRecorder()
		face.ServeHTTP(w, req)
		if w.Code >= 500 || w.Code == 200 && !strings.Contains(w.Body.String(), `"receipts":[`) || w.Code != 200 && !strings.Contains(w.Body.String(), `"error":{"code":`) {
			t.Errorf("got %d %s", w.Code, w.Body.String())
		}
	})
}

// FuzzTag: what is read as a tag reads as itself again, and where the field client opens it stays on this server.
func FuzzTag(f *testing.F) {
	for _, seed := range []string{"K7QM2P3", "k7q-m2p-3", "K7QM2P", "", "//evil.example", "K7QM2P3/../x", "\u202eK7Q", "ILOU", strings.Repeat("K", 300)} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if tag, ok := record.ParseTag(text); ok {
			if again, ok := record.ParseTag(tag); !ok || again != tag || len(tag) != 7 {
				t.Errorf("%q is read as %q, and that as %q", text, tag, again)
			}
		}
		to := fieldTag(text)
		u, err := url.Parse(to)
		if err != nil || u.Host != "" || u.Path != "/field" || strings.ContainsAny(to, "\"<> \r\n") {
			t.Errorf("%q leads to %q (%v)", text, to, err)
		}
	})
}

// FuzzLink: pasted links, typed codes and where to go on.
func FuzzLink(f *testing.F) {
	for _, seed := range []string{"gLpbDH1Q-D96IKtK1p50xO1SA9pgG5yZxdc7ji3eF24", "https://tests.example.org/in/gLpbDH1Q-D96IKtK1p50xO1?next=%2Ffield", "ABCD-EFGH", "/t/K7QM2P3", "//evil.example", `/\evil.example`, "/%2f/evil", "/x\r\n", "javascript:alert(1)"} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if token := linkToken(text); token != "" {
			if again := linkToken(token); again != token || strings.ContainsAny(token, "/?#% \"<>") {
				t.Errorf("%q gives the token %q, and that %q", text, token, again)
			}
		}
		if code := store.BareCode(text); code != "" && (len(code) != 8 || store.BareCode(code) != code) {
			t.Errorf("%q is read as the code %q", text, code)
		}
		next := ownPath(text)
		if next == "" {
			return
		}
		base, _ := url.Parse("https://own.example/in")
		to, err := base.Parse(strings.ReplaceAll(next, `\`, "/"))
		if err != nil || to.Host != "own.example" || to.Scheme != "https" || strings.ContainsAny(next, "\r\n\t\\") {
			t.Errorf("%q leads to %q (%v)", text, next, err)
		}
	})
}
