package bundle

import (
	"context"
	"errors"
	"fmt"
	"hash/maphash"
	"io"
	"regexp"
	"runtime"
	"slices"
	"sync"

	"tripwell/store"
)

// workbook makes the workbook anew from the records and compares every cell. While one is made, the other is read.
func (v *verifier) workbook() error {
	if v.files[workbookFile] == nil {
		v.report.find(workbookFile, "The bundle holds no workbook.")
		return nil
	}
	if !v.sound {
		v.report.note("The cells of the workbook were not compared, because the records they come from are not whole.")
		return nil
	}
	ctx, stop := context.WithCancel(v.ctx)
	got := given{most: rowsBesides}
	for _, f := range v.logs {
		got.most += rowsPerRecord * len(f.leaves)
	}
	var reading sync.WaitGroup
	reading.Go(func() { got.read(ctx, v.files[workbookFile]) })
	again, err := spooled(func(out io.Writer) error {
		return remake(v.ctx, out, v.doc, v.head, v.people, v.inOrder(), true, nil)
	})
	if err != nil {
		stop()
	}
	reading.Wait()
	stop()
	defer got.spool.remove()
	defer again.remove()
	var refused *store.Error
	switch {
	case errors.As(err, &refused):
		v.report.find("records", "The workbook cannot be made from the records: %s", refused.Text)
		return nil
	case err != nil:
		return err
	case v.ctx.Err() != nil:
		return v.ctx.Err()
	case got.err != nil:
		v.report.find(workbookFile, "The workbook cannot be read: %v.", got.err)
		return nil
	}
	if got.sum != v.listedSum(workbookFile) {
		v.report.note("The workbook has been saved again since the bundle was made; its cells are compared all the same.")
	}
	return v.compare(again, &got)
}

// compare holds the workbook that was given against the one the records give.
func (v *verifier) compare(again *spool, got *given) error {
	want, err := openCells(again.file, again.size)
	if err != nil {
		return fmt.Errorf("workbook made from the records: %w", err)
	}
	groups := map[string]*group{}
	var order []*group
	for _, s := range want.sheets {
		name := groupOf(s.name)
		if groups[name] == nil {
			groups[name] = &group{name: name, counts: got.rows[name]}
			order = append(order, groups[name])
		}
		groups[name].want = append(groups[name].want, s)
	}
	for _, s := range got.cells.sheets {
		if g := groups[groupOf(s.name)]; g != nil {
			g.got = append(g.got, s)
		} else {
			v.report.find(workbookFile, "The sheet %s is none of this workbook: somebody put it in.", quote(s.name))
		}
	}
	var work sync.WaitGroup
	turn := make(chan struct{}, runtime.GOMAXPROCS(0))
	for _, g := range order {
		work.Go(func() {
			turn <- struct{}{}
			g.err = g.compare(v.ctx, want, got.cells)
			<-turn
		})
	}
	work.Wait()
	total := 0
	for _, g := range order {
		if g.err != nil {
			return g.err
		}
		total += g.n
		v.report.take(g.found)
	}
	v.report.checked("%d cells of the workbook against what the records say", total)
	return nil
}

// group is a sheet of the workbook, with the further sheets that take its rows when it is full.
type group struct {
	name      string
	want, got []sheetPart
	counts    map[uint64]int32 // rows of got by their hash
	n         int              // cells of want
	found     Report
	err       error
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

// eachRow hands on the rows that hold something; their cells are good until the next.
func (c *cells) eachRow(ctx context.Context, sheets []sheetPart, fn func(r sheetRow) error) error {
	for _, s := range sheets {
		err := c.rows(s, func(number int, cells []cell) error {
			if len(cells) > 0 {
				if err := fn(sheetRow{s.name, number, cells}); err != nil {
					return err
				}
			}
			return ctx.Err()
		})
		if err != nil {
			return fmt.Errorf("sheet %s: %w", s.name, err)
		}
	}
	return nil
}

// compare matches rows, wherever they stand: sorting and filtering is no tampering. Rows that are equal cancel each
// other out; of the rest, those of the same record are compared cell by cell.
func (g *group) compare(ctx context.Context, want, got *cells) error {
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
	err := want.eachRow(ctx, g.want, func(r sheetRow) error {
		g.n += len(r.cells)
		if h := hashRow(r.cells); g.counts[h] > 0 {
			g.counts[h]--
		} else {
			keep(&lacking, r)
		}
		return nil
	})
	if err != nil {
		return err
	}
	left := 0
	for _, c := range g.counts {
		left += int(c)
	}
	if left > 0 {
		// Of rows that are there too often the first are named.
		if err := got.eachRow(ctx, g.got, func(r sheetRow) error {
			if h := hashRow(r.cells); g.counts[h] > 0 {
				g.counts[h]--
				keep(&odd, r)
			}
			return nil
		}); err != nil {
			return err
		}
	}
	if left == 0 && len(lacking) == 0 {
		return nil
	}
	g.explain(odd, lacking)
	if beyond > 0 {
		g.found.find("sheet "+g.name, "%d more rows are not what the records say.", beyond)
	}
	return nil
}

var idCell = regexp.MustCompile(`^s[0-9a-f]{8}-[0-9a-f]{4}-[78][0-9a-f]{3}-[0-9a-f]{4}-[0-9a-f]{12}$`)

// explain says what is wrong with rows that have no equal.
func (g *group) explain(odd, lacking []sheetRow) {
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
			g.found.find(fmt.Sprintf("sheet %s, row %d", r.sheet, r.number), "No record gives this row: %s.", preview(r))
			continue
		}
		used[at] = true
		for _, d := range differing(r.cells, lacking[at].cells) {
			g.found.find(fmt.Sprintf("sheet %s, cell %s%d", r.sheet, columnName(d.column), r.number), "The workbook says %s; the records say %s.", shown(d.got), shown(d.want))
		}
	}
	for i, r := range lacking {
		if !used[i] {
			g.found.find("sheet "+g.name, "A row is missing that the records give: %s.", preview(r))
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
