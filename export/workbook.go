package export

import (
	"fmt"
	"io"
	"iter"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

// WorkbookSource is everything that goes into a workbook: values for the cover, sequences for the long sheets. A
// sequence is read once, row by row, and never held.
type WorkbookSource struct {
	Access       string // what the reader's access covers, where it is read-only
	Organisation string // name of the organisation, "" when none is known
	Sites        []store.Site
	AllSites     bool      // the whole organisation, not a choice of sites
	From, To     forms.Day // by test day, both included; NoDay: open
	AsOf         time.Time // when the store was read
	Store        string    // store id
	Epoch        int
	Demo         bool
	Logs         []LogLine
	Head         string // signed head text, "" when there is none
	NoHead       string // why there is none, "" when nobody asked for one
	Refused      int    // records in quarantine

	Devices iter.Seq2[DeviceLine, error] // walking order
	Entries iter.Seq2[EntryLine, error]  // by site, test day, position
	Due     iter.Seq2[DueLine, error]
	Limits  []LimitLine

	Defects     []DefectLine
	Instruments []store.Instrument
	Plans       []PlanLine
	Months      []MonthLine // by site, then month
	Gaps        []GapLine
	Refusals    []RefusalLine
	Samples     []SampleLine

	Plain bool // unpacked parts: for whoever reads them again at once

	Person     func(id string) store.Person // from the directory, the id alone where unknown; may be nil
	PersonName func(id string) string       // from the directory, "" unknown; may be nil
}

// LogLine is the size and root of one log, with its site's code ("" for org and office).
type LogLine struct {
	store.LogHead
	SiteCode string
}

// DeviceLine is a device with its site.
type DeviceLine struct {
	Site    store.Site
	Device  store.DeviceRow
	Fields  map[string]any // of the register; nil where they are not known
	Circuit map[string]any // fields of its circuit
	AtSite  string         // code of the site a portable item is at, "" at its depot
	Source  string         // tag of the device that feeds it, its place where it has none
	// Imported are the tasks whose last test was brought in and not witnessed.
	Imported []string
}

// DueLine is a due date with its site.
type DueLine struct {
	Site store.Site
	store.DueRow
	Imported bool // the date counts from a test that was brought in and not witnessed
}

// EntryLine is one entry with what its row says in words.
type EntryLine struct {
	store.Entry
	Site       store.Site
	Zone       *time.Location
	DeviceRow  store.DeviceRow
	ByName     string // from the directory, "" where it is unknown
	ReadName   string // who read the instrument, "" when it is the same person
	TypedName  string
	Instrument string     // name and serial
	Replaced   []Replaced // readings that a correction replaced, oldest first
}

// Replaced is what stood before a correction, with its verdict under the same limits: it never disappears.
type Replaced struct {
	Body    forms.Entry
	Verdict forms.Verdict
}

// LimitLine is one limit of one revision of a limit set.
type LimitLine struct {
	Set         string
	Revision    int
	InForce     forms.Day
	ID, Reading string
	Name        string // what forms call the reading, where it is a check an organisation added
	Limit       string // in words: "at most 1 ohm"
	Level       string
	When        string
	Source      string
	Status      string
}

// book is the workbook being written.
type book struct {
	file   *excelize.File
	parts  *sheetParts
	words  *static.Words
	styles sheetStyles
	demo   bool
	src    *WorkbookSource
	rows   int
	named  map[string]string // words looked up by section and code
	used   map[string]bool   // limit set revisions that judged an entry

	mentioned            map[string]int // people the rows name, with the tests they made
	monthsFrom, monthsTo int            // rows of Compliance that the chart draws

	flat    flatRows // for Table: takes the rows of one sheet
	flatKey string
}

func (b *book) say(key string, pairs ...any) string { return b.words.Say(key, pairs...) }

// Workbook writes the auditor's workbook, sheet by sheet in the order of sheetOrder. Rows of the long sheets are streamed, so
// memory does not grow with the number of tests.
func Workbook(w io.Writer, src WorkbookSource) (err error) {
	words, err := static.ReadWords("en")
	if err != nil {
		return fmt.Errorf("workbook: %w", err)
	}
	f := excelize.NewFile()
	defer func() {
		if e := f.Close(); e != nil && err == nil {
			err = fmt.Errorf("workbook: temporary files: %w", e)
		}
	}()
	parts := &sheetParts{}
	defer parts.remove()
	f.SetZipWriter(func(io.Writer) excelize.ZipWriter { return newDirectZip(w, parts, src.Plain) })
	b := &book{file: f, parts: parts, words: words, demo: src.Demo, src: &src, named: map[string]string{}, used: map[string]bool{}, mentioned: map[string]int{}}
	if b.styles, err = makeStyles(f); err != nil {
		return err
	}
	if err := b.write(); err != nil {
		return fmt.Errorf("workbook: %w", err)
	}
	// The zip writer above already sends every part to w; excelize's own buffer stays empty.
	if err := f.Write(io.Discard); err != nil {
		return fmt.Errorf("workbook: %w", err)
	}
	return nil
}

// sheetOrder is the order of the sheets by key.
var sheetOrder = []string{"cover", "register", "entries", "readings", "flags", "due", "defects", "corrections", "compliance", "gaps", "instruments", "plans", "limits",
	"people", "imported", "refused", "sample", "explained"}

func (b *book) write() error {
	for i, key := range sheetOrder {
		name := b.say("sheet.name." + key)
		if i == 0 {
			if err := b.file.SetSheetName("Sheet1", name); err != nil {
				return err
			}
			continue
		}
		if _, err := b.file.NewSheet(name); err != nil {
			return err
		}
	}
	if err := b.docProps(); err != nil {
		return err
	}
	for _, part := range []func() error{b.register, b.entries, b.due, b.defects, b.compliance, b.gaps, b.instruments, b.plans, b.limits, b.people, b.refused, b.sample, b.explained, b.cover, b.chart} {
		if err := part(); err != nil {
			return err
		}
	}
	return nil
}

func (b *book) sheet(key string, cols []column) (*sheet, error) {
	s := &sheet{book: b, key: key, name: b.say("sheet.name." + key), part: 1, cols: cols, letters: make([]string, len(cols))}
	if b.flat != nil {
		if s.flat = b.flat; key != b.flatKey {
			s.flat = noRows{}
		}
		return s, s.open()
	}
	for i := range cols {
		letter, err := excelize.ColumnNumberToName(i + 1)
		if err != nil {
			return nil, err
		}
		s.letters[i] = letter
	}
	return s, s.open()
}

// docProps gives the file its own dates, so that the same source makes the same properties.
func (b *book) docProps() error {
	at := b.src.AsOf.UTC().Format(time.RFC3339)
	return b.file.SetDocProps(&excelize.DocProperties{
		Title: b.say("sheet.title"), Creator: "Tripwell", LastModifiedBy: "Tripwell", Created: at, Modified: at, Language: "en",
		Identifier: b.src.Store,
	})
}

// pageSetup makes a sheet print on landscape pages, so many pages wide, with its name, the page number and the DEMO mark.
func (b *book) pageSetup(name string, wide int) error {
	fit, tall, landscape := true, 0, "landscape"
	if err := b.file.SetSheetProps(name, &excelize.SheetPropsOptions{FitToPage: &fit}); err != nil {
		return err
	}
	if err := b.file.SetPageLayout(name, &excelize.PageLayoutOptions{Orientation: &landscape, FitToWidth: &wide, FitToHeight: &tall}); err != nil {
		return err
	}
	right := ""
	if b.demo {
		right = "&R&B" + b.say("sheet.demo_mark")
	}
	foot := "&L" + b.say("sheet.footer_as_of", "at", b.src.AsOf.UTC().Format("2006-01-02 15:04")) + "&R" + b.say("sheet.footer_page", "page", "&P", "pages", "&N")
	return b.file.SetHeaderFooter(name, &excelize.HeaderFooterOptions{OddHeader: "&L" + b.say("sheet.title") + "&C&A" + right, OddFooter: foot})
}
