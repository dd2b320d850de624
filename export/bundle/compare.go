package bundle

import (
	"errors"
	"fmt"
	"hash/maphash"
	"io"
	"os"
	"regexp"
	"slices"
	"strings"

	"tripwell/store"
)

// workbook makes the workbook anew from the records and compares every cell.
func (v *verifier) workbook() error {
	if v.files[workbookFile] == nil {
		v.report.find(workbookFile, "The bundle holds no workbook.")
		return nil
	}
	if !v.sound {
		v.report.note("The cells of the workbook were not compared, because the records they come from are not whole.")
		return nil
	}
	again, err := spooled(func(out io.Writer) error {
		return remake(v.ctx, out, v.doc, v.head, v.people, v.inOrder(), nil)
	})
	var refused *store.Error
	if errors.As(err, &refused) {
		v.report.find("records", "The workbook cannot be made from the records: %s", refused.Text)
		return nil
	}
	if err != nil {
		return err
	}
	defer again.remove()
	given, err := spooled(func(out io.Writer) error {
		in, err := v.files[workbookFile].Open()
		if err != nil {
			return err
		}
		defer in.Close()
		_, err = io.Copy(out, io.LimitReader(in, fileMost))
		return err
	})
	if err != nil {
		v.report.find(workbookFile, "The workbook cannot be unpacked: %v.", err)
		return nil
	}
	defer given.remove()
	if sum, err := v.sum(workbookFile); err == nil && sum != v.listedSum(workbookFile) {
		v.report.note("The workbook has been saved again since the bundle was made; its cells are compared all the same.")
	}
	return v.compare(again, given)
}

func (v *verifier) listedSum(name string) string {
	for _, f := range v.doc.Files {
		if f.Name == name {
			return f.SHA256
		}
	}
	return ""
}

// spool is a file in the temp folder.
type spool struct {
	file *os.File
	size int64
}

func spooled(fill func(io.Writer) error) (*spool, error) {
	f, err := os.CreateTemp("", "tripwell-check-*")
	if err != nil {
		return nil, fmt.Errorf("room for the workbook: %w", err)
	}
	s := &spool{file: f}
	if err := fill(f); err != nil {
		s.remove()
		return nil, err
	}
	if s.size, err = f.Seek(0, io.SeekEnd); err != nil {
		s.remove()
		return nil, err
	}
	return s, nil
}

func (s *spool) remove() {
	_ = s.file.Close()
	_ = os.Remove(s.file.Name())
}

// compare holds the workbook that was given against the one the records give.
func (v *verifier) compare(again, given *spool) error {
	want, err := openCells(again.file, again.size)
	if err != nil {
		return fmt.Errorf("workbook made from the records: %w", err)
	}
	got, err := openCells(given.file, given.size)
	if err != nil {
		v.report.find(workbookFile, "The workbook cannot be read: %v.", err)
		return nil
	}
	groups := map[string]*group{}
	var order []string
	for _, s := range want.sheets {
		name := strings.TrimRight(s.name, " 0123456789")
		if groups[name] == nil {
			groups[name] = &group{name: name}
			order = append(order, name)
		}
		groups[name].want = append(groups[name].want, s)
	}
	for _, s := range got.sheets {
		g := groups[s.name]
		if g == nil {
			g = groups[strings.TrimRight(s.name, " 0123456789")]
		}
		if g == nil {
			v.report.find(workbookFile, "The sheet %s is none of this workbook: somebody put it in.", quote(s.name))
			continue
		}
		g.got = append(g.got, s)
	}
	total := 0
	for _, name := range order {
		n, err := groups[name].compare(v, want, got)
		if err != nil {
			return err
		}
		total += n
	}
	v.report.checked("%d cells of the workbook against what the records say", total)
	return nil
}

// group is a sheet of the workbook, with the further sheets that take its rows when it is full.
type group struct {
	name      string
	want, got []sheetPart
}

// sheetRow is a row that has no equal on the other side.
type sheetRow struct {
	sheet  string
	number int
	cells  []cell
}

// rowsMost bounds how many rows of a sheet that have no equal are looked at one by one.
const rowsMost = 5_000

var seed = maphash.MakeSeed()

func hashRow(cells []cell) uint64 {
	var h maphash.Hash
	h.SetSeed(seed)
	for _, c := range cells {
		_, _ = h.WriteString(c.value) // never fails
		_ = h.WriteByte(0)
		_ = h.WriteByte(byte(c.column))
		_ = h.WriteByte(byte(c.column >> 8))
	}
	return h.Sum64()
}

// compare matches rows, wherever they stand: sorting and filtering is no tampering. Rows that are equal cancel each
// other out; of the rest, those of the same record are compared cell by cell.
func (g *group) compare(v *verifier, want, got *cells) (n int, err error) {
	counts := map[uint64]int{}
	each := func(c *cells, sheets []sheetPart, fn func(r sheetRow)) error {
		for _, s := range sheets {
			err := c.rows(s, func(number int, cells []cell) error {
				if len(cells) > 0 {
					fn(sheetRow{s.name, number, cells})
				}
				return v.ctx.Err()
			})
			if err != nil {
				return fmt.Errorf("sheet %s: %w", s.name, err)
			}
		}
		return nil
	}
	if err := each(want, g.want, func(r sheetRow) { counts[hashRow(r.cells)]++; n += len(r.cells) }); err != nil {
		return n, err
	}
	var odd, lacking []sheetRow
	beyond := 0
	keep := func(list *[]sheetRow, r sheetRow) {
		if len(*list) == rowsMost {
			beyond++
			return
		}
		r.cells = slices.Clone(r.cells)
		*list = append(*list, r)
	}
	err = each(got, g.got, func(r sheetRow) {
		if h := hashRow(r.cells); counts[h] > 0 {
			counts[h]--
		} else {
			keep(&odd, r)
		}
	})
	if err != nil {
		v.report.find(workbookFile, "%s.", sentence(err))
		return n, nil
	}
	left := 0
	for _, c := range counts {
		left += c
	}
	if left == 0 && len(odd) == 0 {
		return n, nil
	}
	if err := each(want, g.want, func(r sheetRow) {
		if h := hashRow(r.cells); counts[h] > 0 {
			counts[h]--
			keep(&lacking, r)
		}
	}); err != nil {
		return n, err
	}
	g.explain(v, odd, lacking)
	if beyond > 0 {
		v.report.find("sheet "+g.name, "%d more rows are not what the records say.", beyond)
	}
	return n, nil
}

var idCell = regexp.MustCompile(`^s[0-9a-f]{8}-[0-9a-f]{4}-[78][0-9a-f]{3}-[0-9a-f]{4}-[0-9a-f]{12}$`)

// explain says what is wrong with rows that have no equal.
func (g *group) explain(v *verifier, odd, lacking []sheetRow) {
	byID := map[string][]int{}
	for i, r := range lacking {
		for _, c := range r.cells {
			if idCell.MatchString(c.value) {
				byID[c.value] = append(byID[c.value], i)
			}
		}
	}
	used := make([]bool, len(lacking))
	for _, r := range odd {
		at := partner(r, lacking, byID, used)
		if at < 0 {
			v.report.find(fmt.Sprintf("sheet %s, row %d", r.sheet, r.number), "No record gives this row: %s.", preview(r))
			continue
		}
		used[at] = true
		for _, d := range differing(r.cells, lacking[at].cells) {
			v.report.find(fmt.Sprintf("sheet %s, cell %s%d", r.sheet, columnName(d.column), r.number), "The workbook says %s; the records say %s.", shown(d.got), shown(d.want))
		}
	}
	for i, r := range lacking {
		if !used[i] {
			v.report.find("sheet "+g.name, "A row is missing that the records give: %s.", preview(r))
		}
	}
}

// partner finds the row that this one was: the one with most cells in common, by preference among those of the same record.
func partner(r sheetRow, lacking []sheetRow, byID map[string][]int, used []bool) int {
	best, most := -1, 0
	weigh := func(i int) {
		if used[i] {
			return
		}
		if n := max(len(r.cells), len(lacking[i].cells)) - len(differing(r.cells, lacking[i].cells)); n > most {
			best, most = i, n
		}
	}
	for _, c := range r.cells {
		for _, i := range byID[c.value] {
			weigh(i)
		}
	}
	if best < 0 && len(lacking) <= rowsMost/10 {
		for i := range lacking {
			weigh(i)
		}
	}
	return best
}

func preview(r sheetRow) string {
	text := ""
	for i, c := range r.cells {
		if i == 5 {
			return text + ", …"
		}
		if i > 0 {
			text += ", "
		}
		text += shown(c.value)
	}
	return text
}

// difference is a cell that two rows do not share.
type difference struct {
	column    int
	got, want string
}

func differing(got, want []cell) (list []difference) {
	i, j := 0, 0
	for i < len(got) || j < len(want) {
		switch {
		case j == len(want) || i < len(got) && got[i].column < want[j].column:
			list = append(list, difference{got[i].column, got[i].value, ""})
			i++
		case i == len(got) || want[j].column < got[i].column:
			list = append(list, difference{want[j].column, "", want[j].value})
			j++
		default:
			if got[i].value != want[j].value {
				list = append(list, difference{got[i].column, got[i].value, want[j].value})
			}
			i, j = i+1, j+1
		}
	}
	return list
}
