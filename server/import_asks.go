package server

import (
	"cmp"
	"maps"
	"slices"
	"strconv"
	"strings"

	"tripwell/export/intake"
	"tripwell/export/register"
	"tripwell/forms"
)

// previewAsks are the questions about the whole file: only those that matter for it.
func (s *Server) previewAsks(view *previewPage, u upload, r register.Report) {
	k, m := s.ink(), u.mapping
	if r.Ambiguous > 0 || m.Dates != intake.UnknownOrder {
		hint := ""
		if r.Ambiguous > 0 {
			hint = k.say("intake.dates_hint", "n", count(r.Ambiguous))
		}
		view.Asks = append(view.Asks, field{Name: "dates", Label: k.say("intake.dates"), Hint: hint,
			Options: choices(string(m.Dates), "", k.say("intake.dates_ask"), "dmy", k.say("intake.dmy"), "mdy", k.say("intake.mdy"))})
	}
	needZone := m.Zone != ""
	for _, site := range r.NewSites {
		needZone = needZone || site.Zone == ""
		view.NewSites = append(view.NewSites, siteOffer{site.Code, cmp.Or(site.Name, site.Code), count(site.Rows)})
	}
	if needZone {
		view.Asks = append(view.Asks, field{Name: "zone", Type: "text", Label: k.say("intake.zone"), Hint: k.say("intake.zone_hint"), Value: m.Zone, Known: zonesOffered})
	}
	kindless := m.Kind != ""
	for _, t := range r.Tables {
		named := t.Skipped != "" || t.Header == 0
		for _, column := range t.Columns {
			named = named || column.Name == "kind"
		}
		kindless = kindless || !named
	}
	if kindless {
		view.Asks = append(view.Asks, field{Name: "kind", Label: k.say("intake.kind"), Hint: k.say("intake.kind_hint"), Options: s.kindOptions(m.Kind, k.say("intake.kind_none"))})
	}
	ask := func(word, rows, chosen string) {
		if n := len(view.Kinds); n < kindsOnPage {
			view.Kinds = append(view.Kinds, kindAsk{N: n, Word: word, Rows: rows,
				Select: field{Name: "k." + strconv.Itoa(n), Label: k.say("intake.kind_of", "word", word), Options: s.kindOptions(chosen, k.say("intake.kind_unknown"))}})
		}
	}
	for _, word := range r.Kinds {
		ask(word.Word, k.say("intake.rows", "n", count(word.Rows)), "")
	}
	for _, word := range slices.Sorted(maps.Keys(m.Kinds)) {
		ask(word, "", m.Kinds[word])
	}
}

func (s *Server) kindOptions(chosen, none string) []option {
	pairs := []string{"", none}
	for _, kind := range forms.Kinds() {
		pairs = append(pairs, kind, s.words.Say("kind."+kind))
	}
	return choices(chosen, pairs...)
}

// previewSheets are the sheets and, once for all of them, their columns.
func (s *Server) previewSheets(view *previewPage, u upload, r register.Report) {
	k := s.ink()
	offered := []string{"", k.say("intake.not_read")}
	for _, name := range register.ColumnNames() {
		offered = append(offered, name, k.say("intake.column."+name))
	}
	seen := map[string]bool{}
	for n, t := range r.Tables {
		i := "." + strconv.Itoa(n)
		ask := sheetAsk{N: n, Name: t.Sheet, State: k.say("intake.rows", "n", count(t.Rows)),
			Header: field{Name: "header" + i, Type: "number", Label: k.say("intake.header"), Value: textOf(t.Header)},
			Site:   field{Name: "site" + i, Type: "text", Label: k.say("intake.site"), Hint: k.say("intake.site_hint"), Value: t.Site},
			Skip:   field{Name: "skip" + i, Type: "check", Label: k.say("intake.skip")},
		}
		for _, said := range u.mapping.Sheets {
			if said.Name == t.Sheet {
				ask.HeaderSaid, ask.SiteSaid = textOf(said.Header), said.Site
			}
		}
		if t.Skipped != "" {
			ask.State = k.named("intake.skipped", t.Skipped)
		}
		if t.Skipped == "asked" {
			ask.Skip.Value = "yes"
		}
		view.Sheets = append(view.Sheets, ask)
		if t.Skipped != "" {
			continue
		}
		for _, column := range t.Columns {
			label := cmp.Or(intake.Label(column.Key), column.Key)
			if seen[label] || len(view.Columns) == columnsOnPage {
				continue
			}
			seen[label] = true
			id := strconv.Itoa(len(view.Columns))
			view.Columns = append(view.Columns, columnAsk{N: len(view.Columns), Key: column.Key, Heading: cmp.Or(column.Heading, column.Key), Sample: strings.Join(column.Sample, " · "), Known: column.Known,
				Select: field{Name: "c." + id, Label: k.say("intake.column_of", "name", column.Key), Value: column.Name, Options: choices(column.Name, offered...)}})
		}
	}
}

func textOf(n int) string {
	if n == 0 {
		return ""
	}
	return strconv.Itoa(n)
}
