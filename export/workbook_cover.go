package export

import (
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// cover writes the first sheet: whose records, which, as of when, how to prove them, and what they do not prove. It is
// written last because it names the limit revisions the entries were judged with.
func (b *book) cover() error {
	name := b.say("sheet.name.cover")
	if err := b.pageSetup(name, 1); err != nil {
		return err
	}
	f := b.file
	if err := f.SetColWidth(name, "A", "A", 30); err != nil {
		return err
	}
	if err := f.SetColWidth(name, "B", "B", 110); err != nil {
		return err
	}
	row := 0
	put := func(column, text string, style int) error {
		at := column + strconv.Itoa(row)
		if err := f.SetCellStr(name, at, cellText(text)); err != nil {
			return err
		}
		return f.SetCellStyle(name, at, at, style)
	}
	for _, line := range b.coverLines() {
		row++
		style, label := b.styles.wrapped, b.styles.label
		if line.fixed {
			style = b.styles.fixed
		}
		if line.style != 0 {
			label = line.style
		}
		if err := put("A", line.label, label); err != nil {
			return err
		}
		if line.text != "" {
			if err := put("B", line.text, style); err != nil {
				return err
			}
			if n := linesOf(line.text); n > 1 {
				if err := f.SetRowHeight(name, row, min(409, 15*float64(n))); err != nil { // 409 points is the most there is
					return err
				}
			}
		}
	}
	return b.coverCode(name, row+2)
}

// coverChars is how many characters of a line surely stand beside each other in the cover's second column.
const coverChars = 100

// linesOf is how many lines a text takes there: not every program makes a row as high as its text.
func linesOf(text string) (n int) {
	for line := range strings.SplitSeq(text, "\n") {
		n += max(1, (len([]rune(line))+coverChars-1)/coverChars)
	}
	return n
}

// coverCode draws the head as a code, so that a printed cover is a witness: whoever keeps the paper can hold a later bundle
// against it.
func (b *book) coverCode(name string, row int) error {
	head := strings.TrimSpace(b.src.Head)
	if head == "" {
		return nil
	}
	code, err := HeadPNG(head, 4)
	if err != nil {
		return err
	}
	at := "B" + strconv.Itoa(row)
	if err := b.file.SetCellStr(name, "A"+strconv.Itoa(row), b.say("sheet.cover.head_code")); err != nil {
		return err
	}
	if err := b.file.SetCellStyle(name, "A"+strconv.Itoa(row), "A"+strconv.Itoa(row), b.styles.label); err != nil {
		return err
	}
	return b.file.AddPictureFromBytes(name, at, &excelize.Picture{Extension: ".png", File: code, Format: &excelize.GraphicOptions{AltText: b.say("sheet.cover.head_code"), ScaleX: 1, ScaleY: 1}})
}

// coverLine is a label and what it says; with a style of its own it is a line across.
type coverLine struct {
	label, text string
	fixed       bool
	style       int
}

func (b *book) coverLines() []coverLine {
	src := b.src
	lines := []coverLine{{label: b.say("sheet.title"), style: b.styles.title}}
	if b.demo {
		lines = append(lines, coverLine{label: b.say("sheet.demo"), style: b.styles.demo})
	}
	add := func(key, text string) {
		lines = append(lines, coverLine{label: b.say("sheet.cover." + key), text: text})
	}
	if src.Organisation != "" {
		add("organisation", src.Organisation)
	}
	scope := b.say("sheet.cover.scope_some", "n", len(src.Sites))
	if src.AllSites {
		scope = b.say("sheet.cover.scope_all", "n", len(src.Sites))
	}
	add("scope", scope)
	add("sites", b.siteList())
	add("period", b.period())
	if src.Access != "" {
		add("access", src.Access)
	}
	add("as_of", src.AsOf.UTC().Format("2006-01-02 15:04:05")+" UTC")
	add("rows", b.say("sheet.cover.rows_text", "rows", b.rows))
	add("store", src.Store)
	add("epoch", strconv.Itoa(src.Epoch))
	add("judge", strconv.Itoa(forms.JudgeVersion))
	add("revisions", strings.Join(b.revisions(), "\n"))
	for _, l := range src.Logs {
		log := l.Log
		if l.SiteCode != "" {
			log = l.SiteCode + " (" + l.Log + ")"
		}
		lines = append(lines, coverLine{label: b.say("sheet.cover.log"), text: b.say("sheet.cover.log_text", "log", log, "size", l.Size, "root", l.Root)})
	}
	head := coverLine{label: b.say("sheet.cover.head"), text: strings.TrimRight(src.Head, "\n"), fixed: true}
	if src.Head == "" {
		head.text, head.fixed = b.say("sheet.cover.no_head"), false
		if src.NoHead != "" {
			head.text = b.say("sheet.cover.no_head_why", "why", src.NoHead)
		}
	}
	lines = append(lines, head)
	add("proves", b.say("sheet.cover.proves_text"))
	add("proves_not", b.say("sheet.cover.proves_not_text"))
	add("imported", b.say("sheet.cover.imported_text"))
	add("not_included", b.say("sheet.cover.not_included_text", "n", src.Refused))
	add("caution", b.say("sheet.cover.caution_text"))
	return lines
}

func (b *book) siteList() string {
	var list []string
	for _, s := range b.src.Sites {
		list = append(list, b.say("sheet.cover.site", "code", s.Code, "name", s.Name, "zone", s.Zone))
	}
	return strings.Join(list, "\n")
}

func (b *book) period() string {
	from, to := b.src.From, b.src.To
	switch {
	case from == forms.NoDay && to == forms.NoDay:
		return b.say("sheet.cover.period_all")
	case from == forms.NoDay:
		return b.say("sheet.cover.period_to", "to", to)
	case to == forms.NoDay:
		return b.say("sheet.cover.period_from", "from", from)
	}
	return b.say("sheet.cover.period_both", "from", from, "to", to)
}
