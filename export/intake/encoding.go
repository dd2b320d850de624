package intake

import (
	"bytes"
	"unicode/utf8"

	"golang.org/x/text/encoding"
	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"
)

// decodeText brings a text file to UTF-8 and says what it was. A byte order mark decides; without one UTF-16 shows by
// its zero bytes; what is valid UTF-8 is UTF-8; everything else is taken for Windows-1252, the code page in which
// spreadsheets of western Europe and America save CSV.
func decodeText(raw []byte) (text []byte, told string, err error) {
	from := func(e encoding.Encoding, name string) ([]byte, string, error) {
		out, err := e.NewDecoder().Bytes(raw)
		if err != nil {
			return nil, "", refuse("invalid", "The file cannot be read as %s text. In the spreadsheet choose \"Save as\" and the type CSV (UTF-8).", name)
		}
		return out, "Read as " + name + " text.", nil
	}
	switch {
	case bytes.HasPrefix(raw, []byte("\xEF\xBB\xBF")):
		raw = raw[3:]
		if !utf8.Valid(raw) {
			raw = bytes.ToValidUTF8(raw, []byte("\uFFFD"))
		}
		return raw, "Read as UTF-8 text.", nil
	case bytes.HasPrefix(raw, []byte("\xFF\xFE")):
		return from(unicode.UTF16(unicode.LittleEndian, unicode.UseBOM), "UTF-16")
	case bytes.HasPrefix(raw, []byte("\xFE\xFF")):
		return from(unicode.UTF16(unicode.BigEndian, unicode.UseBOM), "UTF-16")
	}
	switch even, odd := zeroBytes(raw); {
	case odd > 0 && even*4 < odd:
		return from(unicode.UTF16(unicode.LittleEndian, unicode.IgnoreBOM), "UTF-16 (without its mark)")
	case even > 0 && odd*4 < even:
		return from(unicode.UTF16(unicode.BigEndian, unicode.IgnoreBOM), "UTF-16 (without its mark)")
	case even+odd > 0:
		return nil, "", refuse("invalid", "The file is no text and no XLSX. %s", saveAsXLSX)
	}
	if utf8.Valid(raw) {
		return raw, "Read as UTF-8 text.", nil
	}
	return from(charmap.Windows1252, "Windows-1252")
}

// zeroBytes counts the zero bytes at even and odd places of the beginning: Latin letters in UTF-16 have one each.
func zeroBytes(raw []byte) (even, odd int) {
	for i, b := range raw[:min(len(raw), 64<<10)] {
		if b == 0 {
			if i%2 == 0 {
				even++
			} else {
				odd++
			}
		}
	}
	return even, odd
}

// isBinary tells text from anything else by its control characters.
func isBinary(text []byte) bool {
	n := 0
	head := text[:min(len(text), 64<<10)]
	for _, b := range head {
		if b < ' ' && b != '\n' && b != '\r' && b != '\t' && b != '\f' && b != '\v' {
			n++
		}
	}
	return n*100 > len(head)
}
