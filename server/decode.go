package server

import (
	"bytes"
	"errors"
	"fmt"
	"net/http"
	"net/url"
	"strings"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// decodeJSON reads the body into dst: exactly one JSON value, names matched by exact case, none twice, none unknown.
// The size limit stands in the route table.
func decodeJSON(c echo.Context, dst any, opts ...json.Options) error {
	raw, err := readBody(c.Request())
	if err != nil {
		return err
	}
	if len(strings.TrimSpace(string(raw[:min(len(raw), 64)]))) == 0 {
		return refuse(codeInvalid, "", "The request has no body. Send one JSON value.")
	}
	opts = append([]json.Options{json.RejectUnknownMembers(true)}, opts...)
	if err := json.Unmarshal(raw, dst, opts...); err != nil {
		return badJSON(err)
	}
	return nil
}

// readBody reads a body whole; the size limit stands in the route table. An announced length spares growing the buffer.
func readBody(r *http.Request) ([]byte, error) {
	var b bytes.Buffer
	if r.ContentLength > 0 {
		b.Grow(int(r.ContentLength) + bytes.MinRead)
	}
	_, err := b.ReadFrom(r.Body)
	return b.Bytes(), err
}

// badJSON says where a body cannot be read and what to do.
func badJSON(err error) error {
	var meaning *json.SemanticError
	isMeaning := errors.As(err, &meaning)
	var refusal *store.Error
	if errors.As(err, &refusal) && isMeaning {
		return refuse(refusal.Code, fieldOf(meaning.JSONPointer), refusal.Text)
	}
	var syntax *jsontext.SyntacticError
	if errors.As(err, &syntax) {
		if errors.Is(err, jsontext.ErrDuplicateName) {
			return refuse(codeInvalid, fieldOf(syntax.JSONPointer), fmt.Sprintf("A name stands twice in the JSON, at byte %d. Send each name once.", syntax.ByteOffset))
		}
		return refuse(codeInvalid, fieldOf(syntax.JSONPointer), fmt.Sprintf("The body is not well-formed JSON at byte %d. Send one JSON value.", syntax.ByteOffset))
	}
	if isMeaning {
		field := fieldOf(meaning.JSONPointer)
		if errors.Is(err, json.ErrUnknownName) {
			return refuse(codeInvalid, field, fmt.Sprintf("%q is not asked for here. Leave it out.", field))
		}
		return refuse(codeInvalid, field, fmt.Sprintf("%q has a value of the wrong kind. Look up its form and send it again.", field))
	}
	return fmt.Errorf("decode body: %w", err)
}

// fieldOf writes a JSON pointer the way a person reads it: records.3.record.
func fieldOf(p jsontext.Pointer) string {
	var parts []string
	for t := range p.Tokens() {
		parts = append(parts, t)
	}
	return strings.Join(parts, ".")
}

// decodeForm reads the fields of an ordinary page form. Repeated fields keep all their values.
func decodeForm(c echo.Context) (url.Values, error) {
	if err := c.Request().ParseForm(); err != nil {
		return nil, formError(err)
	}
	return c.Request().PostForm, nil
}

func formError(err error) error {
	if w, fault := wrongOf(err); !fault {
		return refuse(w.Code, w.Field, w.Text)
	}
	return refuse(codeInvalid, "", "The form cannot be read. Open the page again and send it once more.")
}
