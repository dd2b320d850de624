package bundle

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"unicode/utf8"
)

// markup reads the XML of a workbook's parts token by token. A check reads every cell of two workbooks; the standard
// decoder takes about six times as long over them. It knows what such parts may hold: elements, attributes, text, references to
// characters, comments, CDATA; there is no document type in them, and one is refused.
type markup struct {
	in   *bufio.Reader
	tag  []byte
	text []byte
}

// element is a start tag; it is good until the next token.
type element struct {
	name string // without a prefix
	rest []byte // attributes as written
}

// markupMost bounds one tag and one text.
const markupMost = 1 << 20

var errMarkup = errors.New("its markup is damaged")

// walk hands on what it reads. An empty element gives a start and an end. Text may come in several parts.
func (m *markup) walk(start func(e element) error, end func(name string) error, text func(t []byte) error) error {
	for {
		if err := m.readText(text); err != nil {
			if err == io.EOF {
				return nil
			}
			return err
		}
		done, err := m.readTag()
		if err != nil {
			return err
		}
		if done == nil {
			continue
		}
		switch done[0] {
		case '?':
		case '/':
			if err := end(local(bytes.TrimSpace(done[1:]))); err != nil {
				return err
			}
		case '!':
			if !bytes.HasPrefix(done, []byte("![CDATA[")) {
				return errMarkup
			}
			if err := text(done[8:]); err != nil {
				return err
			}
		default:
			empty := done[len(done)-1] == '/'
			if empty {
				done = done[:len(done)-1]
			}
			name, rest := done, []byte(nil)
			if i := bytes.IndexAny(done, " \t\r\n"); i >= 0 {
				name, rest = done[:i], done[i:]
			}
			e := element{local(name), rest}
			if err := start(e); err != nil {
				return err
			}
			if empty {
				if err := end(e.name); err != nil {
					return err
				}
			}
		}
	}
}

// readText reads up to the next tag.
func (m *markup) readText(text func(t []byte) error) error {
	for {
		part, err := m.in.ReadSlice('<')
		if len(part) > 0 && part[len(part)-1] == '<' {
			part = part[:len(part)-1]
		}
		m.text = append(m.text, part...)
		if errors.Is(err, bufio.ErrBufferFull) {
			if len(m.text) > markupMost {
				return fmt.Errorf("it holds a text of more than %d bytes", markupMost)
			}
			continue
		}
		if len(m.text) > 0 && (err == nil || err == io.EOF) {
			plain, bad := unescape(m.text)
			if bad == nil {
				bad = text(plain)
			}
			if bad != nil {
				return bad
			}
		}
		m.text = m.text[:0]
		return err
	}
}

// readTag reads a tag without its brackets; nil for a comment.
func (m *markup) readTag() ([]byte, error) {
	m.tag = m.tag[:0]
	closing := []byte(">")
	for {
		part, err := m.in.ReadSlice('>')
		m.tag = append(m.tag, part...)
		if len(m.tag) > markupMost {
			return nil, fmt.Errorf("it holds a tag of more than %d bytes", markupMost)
		}
		if errors.Is(err, bufio.ErrBufferFull) {
			continue
		}
		if err != nil {
			return nil, errMarkup // it ends within a tag
		}
		if bytes.HasPrefix(m.tag, []byte("!--")) {
			closing = []byte("-->")
		} else if bytes.HasPrefix(m.tag, []byte("![CDATA[")) {
			closing = []byte("]]>")
		} else if bytes.Count(m.tag, []byte(`"`))%2 == 1 {
			continue // the bracket stands within a value
		}
		if bytes.HasSuffix(m.tag, closing) {
			break
		}
	}
	done := m.tag[:len(m.tag)-len(closing)]
	if len(closing) == 3 && closing[0] == '-' {
		return nil, nil
	}
	if len(done) == 0 {
		return nil, errMarkup
	}
	return done, nil
}

// local leaves the prefix of a name out. The few names of a sheet are not made anew each time.
func local(name []byte) string {
	if i := bytes.LastIndexByte(name, ':'); i >= 0 {
		name = name[i+1:]
	}
	switch string(name) {
	case "c":
		return "c"
	case "v":
		return "v"
	case "t":
		return "t"
	case "is":
		return "is"
	case "row":
		return "row"
	case "si":
		return "si"
	case "r":
		return "r"
	}
	return string(name)
}

// attribute gives the value of an attribute; with a prefix, any prefix does.
func (e element) attribute(name string, prefixed bool) string {
	rest := e.rest
	for {
		i := bytes.IndexByte(rest, '=')
		if i < 0 {
			return ""
		}
		key := bytes.TrimSpace(rest[:i])
		rest = bytes.TrimLeft(rest[i+1:], " \t\r\n")
		if len(rest) == 0 || rest[0] != '"' && rest[0] != '\'' {
			return ""
		}
		end := bytes.IndexByte(rest[1:], rest[0])
		if end < 0 {
			return ""
		}
		value := rest[1 : 1+end]
		rest = rest[end+2:]
		colon := bytes.LastIndexByte(key, ':')
		if string(key[colon+1:]) != name || prefixed != (colon >= 0) {
			continue
		}
		if plain, err := unescape(value); err == nil {
			return string(plain)
		}
		return ""
	}
}

// unescape resolves references in place.
func unescape(b []byte) ([]byte, error) {
	at := bytes.IndexByte(b, '&')
	if at < 0 {
		return b, nil
	}
	out := b[:at]
	for rest := b[at:]; len(rest) > 0; {
		if rest[0] != '&' {
			next := bytes.IndexByte(rest, '&')
			if next < 0 {
				next = len(rest)
			}
			out, rest = append(out, rest[:next]...), rest[next:]
			continue
		}
		end := bytes.IndexByte(rest, ';')
		if end < 0 || end > 12 {
			return nil, errMarkup
		}
		ref := string(rest[1:end])
		rest = rest[end+1:]
		switch ref {
		case "lt":
			out = append(out, '<')
		case "gt":
			out = append(out, '>')
		case "amp":
			out = append(out, '&')
		case "quot":
			out = append(out, '"')
		case "apos":
			out = append(out, '\'')
		default:
			digits, base := strings.TrimPrefix(ref, "#"), 10
			if hex := strings.TrimPrefix(digits, "x"); hex != digits {
				digits, base = hex, 16
			}
			n, err := strconv.ParseInt(digits, base, 32)
			if err != nil || ref[:1] != "#" || !utf8.ValidRune(rune(n)) {
				return nil, errMarkup
			}
			out = utf8.AppendRune(out, rune(n)) // never longer than the reference was
		}
	}
	return out, nil
}
