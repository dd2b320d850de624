package export

import (
	"strings"
	"unicode/utf8"
)

// cellUnits is the most a cell holds: 32,767 UTF-16 code units (Office Open XML spreadsheets as every reader limits
// them). excelize would cut there without a word.
const cellUnits = 32767

// cutMark stands at the end of a text that was too long for a cell.
const cutMark = " … [cut: longer than a cell holds]"

// cellText makes any text safe for a cell: control characters that XML cannot carry become U+FFFD, what a reader would
// take for an escape (_x0041_) is kept as typed, and a text that is too long is cut with a visible mark.
func cellText(s string) string {
	if plainShort(s) {
		return s
	}
	s = keepEscapes(plainText(s))
	if units(s) <= cellUnits {
		return s
	}
	room, at := cellUnits-units(cutMark), 0
	for i, r := range s {
		n := 1
		if r > 0xFFFF {
			n = 2
		}
		if room < n {
			at = i
			break
		}
		room -= n
	}
	return s[:at] + cutMark
}

// plainText replaces what is no text: bytes that are no UTF-8 and control characters other than tab and line breaks.
func plainText(s string) string {
	if plainShort(s) {
		return s
	}
	return strings.Map(func(r rune) rune {
		switch {
		case r == '\t' || r == '\n' || r == '\r':
			return r
		case r < 0x20, r == 0xFFFE, r == 0xFFFF:
			return utf8.RuneError
		}
		return r
	}, strings.ToValidUTF8(s, string(utf8.RuneError)))
}

// appendCellText appends the text of a cell as XML, from inside its start tag on: ` xml:space="preserve">text`.
func appendCellText(to []byte, s string) []byte {
	if s[0] <= ' ' || s[len(s)-1] <= ' ' {
		to = append(to, ` xml:space="preserve"`...)
	}
	to = append(to, '>')
	from := 0
	for i := 0; i < len(s); i++ {
		var mark string
		switch s[i] {
		case '&':
			mark = "&amp;"
		case '<':
			mark = "&lt;"
		case '>':
			mark = "&gt;"
		case '\r':
			mark = "&#xD;" // a bare one would be read as a line feed (XML 1.0, 2.11)
		default:
			continue
		}
		to = append(append(to, s[from:i]...), mark...)
		from = i + 1
	}
	return append(to, s[from:]...)
}

// plainShort is the usual case, decided without copying.
func plainShort(s string) bool {
	if len(s) > cellUnits {
		return false
	}
	for i := 0; i < len(s); i++ {
		if c := s[i]; c < 0x20 || c == 0x7F || c == '_' || c >= utf8.RuneSelf {
			return false
		}
	}
	return true
}

func units(s string) (n int) {
	for _, r := range s {
		if n++; r > 0xFFFF {
			n++
		}
	}
	return n
}

// keepEscapes writes _x005F_ before every _xHHHH_, which readers of the format would otherwise turn into a character
// (ECMA-376 part 1, 22.9.2.19 ST_Xstring).
func keepEscapes(s string) string {
	if !strings.Contains(s, "_x") {
		return s
	}
	var b strings.Builder
	for i := 0; i < len(s); i++ {
		if isEscape(s[i:]) {
			b.WriteString("_x005F")
		}
		b.WriteByte(s[i])
	}
	return b.String()
}

func isEscape(s string) bool {
	if len(s) < 7 || s[0] != '_' || s[1] != 'x' || s[6] != '_' {
		return false
	}
	for _, c := range []byte(s[2:6]) {
		if (c < '0' || c > '9') && (c < 'a' || c > 'f') && (c < 'A' || c > 'F') {
			return false
		}
	}
	return true
}
