package bundle

import (
	"bufio"
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"strings"
	"testing"
)

// heard writes down what markup reads.
func heard(raw []byte) (string, error) {
	var b strings.Builder
	m := markup{in: bufio.NewReaderSize(bytes.NewReader(raw), 64)}
	err := m.walk(func(e element) error {
		fmt.Fprintf(&b, "<%s r=%q>", e.name, e.attribute("r", false))
		return nil
	}, func(name string) error { fmt.Fprintf(&b, "</%s>", name); return nil }, func(t []byte) error { b.Write(t); return nil })
	return b.String(), err
}

// heardBefore is the same through the standard decoder.
func heardBefore(raw []byte) (string, error) {
	var b strings.Builder
	d := xml.NewDecoder(bytes.NewReader(raw))
	for {
		t, err := d.RawToken()
		if err == io.EOF {
			return b.String(), nil
		}
		if err != nil {
			return b.String(), err
		}
		switch t := t.(type) {
		case xml.StartElement:
			if strings.Contains(t.Name.Local, ":") {
				return "", io.ErrUnexpectedEOF // no name that anything writes
			}
			at := ""
			for _, a := range t.Attr {
				if a.Name.Local == "r" && a.Name.Space == "" {
					at = a.Value
					break
				}
			}
			fmt.Fprintf(&b, "<%s r=%q>", t.Name.Local, at)
		case xml.EndElement:
			fmt.Fprintf(&b, "</%s>", t.Name.Local)
		case xml.CharData:
			b.Write(t)
		}
	}
}

// FuzzMarkup holds the fast reader against the standard library's on whatever that one takes.
func FuzzMarkup(f *testing.F) {
	for _, s := range []string{
		`<?xml version="1.0"?><sheetData><row r="1"><c r="A1" t="inlineStr"><is><t xml:space="preserve"> a &lt;b&gt; &amp; &#39;c&#x41; </t></is></c></row></sheetData>`,
		`<x:row r="2"><x:c r='B2' t="s"/><!-- a > b --><v><![CDATA[1 < 2 & 3]]></v></x:row>`, `<c r="a&quot;>b"/>text`, `<a></a>`, `<a b = "c" r= "d">`,
		strings.Repeat("<v>long text</v>", 40), "<t>" + strings.Repeat("x", 500) + "</t>",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		got, err := heard(raw) // never panics
		want, bad := heardBefore(raw)
		if bad != nil || err != nil || bytes.Contains(raw, []byte("\r")) || bytes.Contains(raw, []byte("]]>")) && !bytes.Contains(raw, []byte("CDATA")) {
			return
		}
		if got != want {
			t.Errorf("got %q, want %q of %q", got, want, raw)
		}
	})
}

func TestMarkup_ReadsWhatWorkbooksHold(t *testing.T) {
	for raw, want := range map[string]string{
		`<row r="1"><c r="A1" t="s"><v>1</v></c></row>`: `<row r="1"><c r="A1"><v r="">1</v></c></row>`,
		`<t>a &lt;b&gt; &amp;&#65;&#x42;</t>`:           `<t r="">a <b> &AB</t>`,
		`<c r="x>y"/>`:                                  `<c r="x>y"></c>`,
		`<!-- <v>no</v> --><v><![CDATA[1 < 2]]></v>`:    `<v r="">1 < 2</v>`,
	} {
		if got, err := heard([]byte(raw)); err != nil || got != want {
			t.Errorf("%s: got %s %v, want %s", raw, got, err, want)
		}
	}
	for _, raw := range []string{"<a", "<!DOCTYPE x [<!ENTITY y \"z\">]><a/>", "<a>&nothing;</a>", "<a>&#xD800;</a>", "<>"} {
		if _, err := heard([]byte(raw)); err == nil {
			t.Errorf("%q was read", raw)
		}
	}
}
