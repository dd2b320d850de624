package intake

import (
	"encoding/xml"
	"path"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"
)

// workbook is what the sheets of an XLSX share.
type workbook struct {
	*parts
	shared []string
	dates  []dateKind // by style of a cell
	from04 bool       // days are counted from 1904-01-01
	links  map[string]string
}

// readPacked reads the worksheets of an XLSX.
func (b *Book) readPacked(raw []byte, room *space) error {
	p, err := openParts(raw, room)
	if err != nil {
		return err
	}
	w := &workbook{parts: p, links: map[string]string{}}
	home := "xl/workbook.xml"
	err = p.walk("_rels/.rels", func(_ *walker, e xml.StartElement) error {
		if strings.HasSuffix(attr(e, "Type"), "/officeDocument") {
			home = strings.TrimPrefix(attr(e, "Target"), "/")
		}
		return nil
	})
	if err != nil {
		return err
	}
	sheets, err := w.readHome(home)
	if err != nil {
		return err
	}
	hidden := 0
	for _, s := range sheets {
		sheet, err := w.readSheet(b, s)
		if err != nil {
			return err
		}
		if sheet.Hidden {
			hidden++
		}
		b.Sheets = append(b.Sheets, sheet)
	}
	b.Told = append(b.Told, "Read as an XLSX workbook with "+countOf(len(sheets), "sheet", "sheets")+".")
	if hidden > 0 {
		b.Told = append(b.Told, countOf(hidden, "sheet is", "sheets are")+" hidden in the spreadsheet.")
	}
	if w.from04 {
		b.Told = append(b.Told, "Its days are counted from 1904.")
	}
	return nil
}

func countOf(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + many
}

// sheetPart is a worksheet as the workbook lists it.
type sheetPart struct {
	name, file string
	hidden     bool
}

// readHome reads the list of sheets, and what they share.
func (w *workbook) readHome(home string) (sheets []sheetPart, err error) {
	dir := path.Dir(home)
	var texts, styles string
	err = w.walk(path.Join(dir, "_rels", path.Base(home)+".rels"), func(_ *walker, e xml.StartElement) error {
		target := attr(e, "Target")
		if !strings.HasPrefix(target, "/") {
			target = path.Join(dir, target)
		}
		kind := path.Base(attr(e, "Type"))
		switch {
		case strings.EqualFold(attr(e, "TargetMode"), "External"):
			return nil // never opened
		case kind == "worksheet":
			w.links[attr(e, "Id")] = target
		case kind == "sharedStrings":
			texts = target
		case kind == "styles":
			styles = target
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	err = w.walk(home, func(_ *walker, e xml.StartElement) error {
		switch e.Name.Local {
		case "workbookPr":
			w.from04 = isOn(attr(e, "date1904"))
		case "sheet":
			file := w.links[attr(e, "id")]
			if file == "" {
				return nil // a chart sheet, or a macro sheet
			}
			if len(sheets) == w.room.caps.Sheets {
				return refuse("too_large", "The file has more than %d sheets. Import it in parts.", w.room.caps.Sheets)
			}
			sheets = append(sheets, sheetPart{brief(attr(e, "name")), file, attr(e, "state") != "" && attr(e, "state") != "visible"})
		}
		return nil
	})
	switch {
	case err != nil:
		return nil, err
	case len(sheets) == 0:
		return nil, refuse("invalid", "The file holds no worksheet. %s", saveAsXLSX)
	}
	if err := w.readShared(texts); err != nil {
		return nil, err
	}
	return sheets, w.readStyles(styles)
}

func isOn(s string) bool { return s == "1" || s == "true" || s == "on" }

// readShared reads the texts that cells refer to by number. Readings of foreign letters (rPh) are no part of a text.
func (w *workbook) readShared(part string) error {
	return w.walk(part, func(p *walker, e xml.StartElement) error {
		if e.Name.Local != "si" {
			return nil
		}
		if len(w.shared) >= w.room.caps.Cells {
			return tooMuch(w.room.caps)
		}
		s, err := p.text("rPh")
		w.shared = append(w.shared, w.cellText(s))
		return err
	})
}

var escaped = regexp.MustCompile(`_x[0-9A-Fa-f]{4}_`)

// cellText trims a text, resolves the _x000D_ escapes of the format, and keeps it within its bound.
func (w *workbook) cellText(s string) string {
	if strings.Contains(s, "_x") {
		s = escaped.ReplaceAllStringFunc(s, func(m string) string {
			n, err := strconv.ParseUint(m[2:6], 16, 16)
			if err != nil || !utf8.ValidRune(rune(n)) {
				return ""
			}
			return string(rune(n))
		})
	}
	s = strings.TrimSpace(strings.ReplaceAll(strings.ReplaceAll(s, "\r\n", "\n"), "\r", "\n"))
	if len(s) > w.room.caps.Letters && utf8.RuneCountInString(s) > w.room.caps.Letters {
		s = string([]rune(s)[:w.room.caps.Letters])
	}
	return s
}

// readStyles finds which styles show a number as a date or a time.
func (w *workbook) readStyles(part string) error {
	formats := map[string]dateKind{}
	inCells := false
	return w.walk(part, func(_ *walker, e xml.StartElement) error {
		switch e.Name.Local {
		case "numFmt":
			if !inCells && len(formats) < 10_000 {
				formats[attr(e, "numFmtId")] = dateFormat(attr(e, "formatCode"))
			}
		case "cellXfs":
			inCells = true
		case "cellStyles", "dxfs":
			inCells = false
		case "xf":
			if !inCells || len(w.dates) > 100_000 {
				return nil
			}
			id := attr(e, "numFmtId")
			kind, own := formats[id]
			if !own {
				kind = builtInFormat(id)
			}
			w.dates = append(w.dates, kind)
		}
		return nil
	})
}

// dateKind says how a number of a style is shown.
type dateKind byte

const (
	asNumber dateKind = iota
	asDay             // with a day, perhaps also a time
	asTime            // a time of day or a duration only
)

// builtInFormat: ECMA-376 part 1, 18.8.30, numFmtId 14 to 22 and 45 to 47, and the ids that east Asian versions use for dates.
func builtInFormat(id string) dateKind {
	n, err := strconv.Atoi(id)
	switch {
	case err != nil:
		return asNumber
	case n >= 14 && n <= 17, n == 22, n >= 27 && n <= 31, n == 36, n >= 50 && n <= 54, n == 57, n == 58:
		return asDay
	case n >= 18 && n <= 21, n >= 45 && n <= 47, n >= 32 && n <= 35, n == 55, n == 56:
		return asTime
	}
	return asNumber
}

// literal is what a format code shows as it stands: quoted, escaped, padding and bracketed parts.
var literal = regexp.MustCompile(`"[^"]*"|\\.|_.|\*.|\[[^\]]*\]`)

// dateFormat tells a format code of dates by its letters.
func dateFormat(code string) dateKind {
	if len(code) > 1024 {
		return asNumber
	}
	code = strings.ToLower(code)
	elapsed := strings.Contains(code, "[h") || strings.Contains(code, "[m") || strings.Contains(code, "[s")
	code, _, _ = strings.Cut(literal.ReplaceAllString(code, ""), ";")
	code = strings.ReplaceAll(code, "general", "")
	switch {
	case strings.ContainsAny(code, "yd"):
		return asDay
	case elapsed, strings.ContainsAny(code, "hs"):
		return asTime
	case strings.Contains(code, "m"):
		return asDay // a month alone
	}
	return asNumber
}
