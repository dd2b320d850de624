package intake

import (
	"archive/zip"
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"path"
	"strings"
)

// parts is an XLSX file by its packed parts, names as the package gives them without a leading slash.
type parts struct {
	files map[string]*zip.File
	room  *space
}

// central is what each entry of a zip's directory begins with. It is counted before anything is parsed: the reader of
// archives makes an entry for each.
var central = []byte("PK\x01\x02")

// openParts looks at the directory of a packed file, and refuses what may not be read, before anything is unpacked.
func openParts(raw []byte, room *space) (*parts, error) {
	caps := room.caps
	if bytes.Count(raw, central) > caps.Entries {
		return nil, refuse("too_large", "More than %d files are packed into this one. %s", caps.Entries, saveAsXLSX)
	}
	z, err := zip.NewReader(bytes.NewReader(raw), int64(len(raw)))
	if err != nil {
		return nil, refuse("invalid", "The file is damaged: its parts cannot be listed. Fetch or save it again.")
	}
	p := &parts{files: make(map[string]*zip.File, len(z.File)), room: room}
	var total uint64
	for _, f := range z.File {
		name := strings.TrimPrefix(strings.ReplaceAll(f.Name, `\`, "/"), "/")
		lower := strings.ToLower(name)
		switch {
		case f.Flags&1 != 0:
			return nil, refuse("invalid", "The file is locked with a password. Take the password off and save it again.")
		case path.Base(lower) == "vbaproject.bin":
			return nil, refuse("invalid", "The file holds macros, which are programs. Save it as XLSX without macros.")
		case strings.Contains(lower, "externallinks/"):
			return nil, refuse("invalid", "The file has links to other files. In the spreadsheet break the links, so that the values stay, and save it again.")
		case lower == "xl/workbook.bin":
			return nil, refuse("invalid", "The file is in the binary XLSB form. %s", saveAsXLSX)
		case f.UncompressedSize64 > 1<<20 && f.CompressedSize64 > 0 && f.UncompressedSize64/f.CompressedSize64 > uint64(caps.Ratio):
			return nil, refuse("too_large", "A part of the file unpacks to more than %d times its size, as damaged or hostile files do. %s", caps.Ratio, saveAsXLSX)
		}
		if total += f.UncompressedSize64; total > uint64(caps.Unpacked) || f.UncompressedSize64 > uint64(caps.Unpacked) {
			return nil, tooMuch(caps)
		}
		if _, twice := p.files[lower]; twice {
			return nil, refuse("invalid", "The file is damaged: it holds one of its parts twice. %s", saveAsXLSX)
		}
		p.files[lower] = f
	}
	switch {
	case p.files["mimetype"] != nil:
		return nil, refuse("invalid", "The file is an OpenDocument file. %s", saveAsXLSX)
	case p.files["word/document.xml"] != nil, p.files["ppt/presentation.xml"] != nil:
		return nil, refuse("invalid", "The file is a document or a presentation, not a sheet. Copy its table into a spreadsheet and save that.")
	case p.files["[content_types].xml"] == nil:
		return nil, refuse("invalid", "The file is an archive, not a sheet. Unpack it and choose the sheet inside.")
	}
	return p, p.checkTypes()
}

func tooMuch(caps Caps) *Error {
	return refuse("too_large", "The file unpacks to more than %d MiB. Delete what is not needed, or import it in parts, one site a file.", caps.Unpacked>>20)
}

// checkTypes refuses a macro workbook by what the package says of itself, whatever the file is named.
func (p *parts) checkTypes() error {
	found := false
	err := p.walk("[content_types].xml", func(_ *walker, e xml.StartElement) error {
		kind := strings.ToLower(attr(e, "ContentType"))
		if strings.Contains(kind, "macroenabled") || strings.Contains(kind, "vbaproject") {
			return refuse("invalid", "The file holds macros, which are programs. Save it as XLSX without macros.")
		}
		found = found || strings.Contains(kind, "spreadsheetml")
		return nil
	})
	if err == nil && !found {
		return refuse("invalid", "The file is an archive, not a sheet. Unpack it and choose the sheet inside.")
	}
	return err
}

// open unpacks one part; reading ends with errUnpacked when the file's whole allowance is used up, whatever sizes the
// directory stated.
func (p *parts) open(name string) (*rationed, error) {
	f := p.files[strings.ToLower(strings.TrimPrefix(name, "/"))]
	if f == nil {
		return nil, errNoPart
	}
	r, err := f.Open()
	if err != nil {
		return nil, refuse("invalid", "The file is damaged: %s cannot be unpacked. Fetch or save it again.", brief(name))
	}
	return &rationed{ReadCloser: r, room: p.room}, nil
}

var errNoPart = errors.New("no such part")

// rationed reads a part within what the whole file and a single token may take.
type rationed struct {
	io.ReadCloser
	room  *space
	token int
}

func (r *rationed) Read(b []byte) (int, error) {
	n, err := r.ReadCloser.Read(b)
	r.room.bytes += int64(n)
	r.token += n
	if r.room.bytes > r.room.caps.Unpacked || r.token > longestToken {
		return 0, errUnpacked
	}
	return n, err
}

// longestToken bounds one tag or one text in bytes: a tag of nothing but attributes would take many times its size.
const longestToken = 1 << 20

// walker reads the tokens of one part.
type walker struct {
	d     *xml.Decoder
	r     *rationed
	depth int
}

// next gives the next token; elements nested too deep and tokens too long are refused.
func (w *walker) next() (xml.Token, error) {
	w.r.token = 0
	t, err := w.d.Token()
	if err != nil {
		return nil, err
	}
	switch t.(type) {
	case xml.StartElement:
		if w.depth++; w.depth > deepest {
			return nil, refuse("invalid", "The file is damaged: its parts are nested too deep. %s", saveAsXLSX)
		}
	case xml.EndElement:
		w.depth--
	}
	return t, nil
}

// walk calls visit for each element of a part; visit may read on up to the element's end. A part that is not there has
// none.
func (p *parts) walk(name string, visit func(w *walker, e xml.StartElement) error) error {
	r, err := p.open(name)
	if errors.Is(err, errNoPart) {
		return nil
	}
	if err != nil {
		return err
	}
	defer r.Close()
	w := &walker{d: xml.NewDecoder(r), r: r}
	for {
		t, err := w.next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return p.unreadable(name, err)
		}
		if e, ok := t.(xml.StartElement); ok {
			if err := visit(w, e); err != nil {
				return p.unreadable(name, err)
			}
		}
	}
}

// deepest is how deep elements of a part may be nested; the sheets of spreadsheets stay below 20.
const deepest = 200

func (p *parts) unreadable(name string, err error) error {
	var refused *Error
	switch {
	case errors.As(err, &refused):
		return err
	case errors.Is(err, errUnpacked):
		return tooMuch(p.room.caps)
	}
	return refuse("invalid", "The file is damaged: %s cannot be read. Open it in a spreadsheet, save it again and try once more.", brief(name))
}

func attr(e xml.StartElement, name string) string {
	for _, a := range e.Attr {
		if a.Name.Local == name {
			return a.Value
		}
	}
	return ""
}

// text gathers the text inside the element just begun, up to its end. Inside elements named skip nothing is taken.
func (w *walker) text(skip string) (string, error) {
	var s strings.Builder
	outside, skipping := w.depth-1, 0
	for w.depth > outside {
		t, err := w.next()
		if err != nil {
			return "", noEnd(err)
		}
		switch t := t.(type) {
		case xml.StartElement:
			if skipping == 0 && t.Name.Local == skip {
				skipping = w.depth
			}
		case xml.EndElement:
			if w.depth < skipping {
				skipping = 0
			}
		case xml.CharData:
			if skipping == 0 {
				s.Write(t)
			}
		}
	}
	return s.String(), nil
}

// noEnd: a part that ends inside an element is damaged, not at its end.
func noEnd(err error) error {
	if errors.Is(err, io.EOF) {
		return io.ErrUnexpectedEOF
	}
	return err
}
