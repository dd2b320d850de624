package export

import (
	"maps"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/store"
)

var peopleColumns = []column{
	{"person", 24, textCell}, {"role", 14, textCell}, {"licence", 30, textCell}, {"licence_until", 14, dayCell}, {"may", 36, textCell}, {"status", 14, textCell},
	{"tests", 10, countCell}, {"person_id", 38, textCell},
}

// people writes whom the rows of the workbook name, as the organisation states them: names are no part of the proof.
func (b *book) people() error {
	s, err := b.sheet("people", peopleColumns)
	if err != nil {
		return err
	}
	for _, id := range slices.Sorted(maps.Keys(b.mentioned)) {
		p := store.Person{ID: id}
		if b.src.Person != nil {
			p = b.src.Person(id)
		}
		role, status := "", ""
		if p.Role != "" {
			role, status = b.say("access.role_"+p.Role), b.say("sheet.active")
			if !p.Active {
				status = b.say("sheet.not_active")
			}
		}
		until := forms.NoDay
		if p.LicenceUntil != nil {
			until = *p.LicenceUntil
		}
		may := make([]string, len(p.May))
		for i, what := range p.May {
			may[i] = b.say("office.may." + what)
		}
		if err := s.row().text(p.Name).text(role).text(p.Licence).day(until).text(strings.Join(may, ", ")).text(status).count(int64(b.mentioned[id])).text(id).end(); err != nil {
			return err
		}
	}
	return s.close()
}

// mention notes that a row names a person.
func (b *book) mention(id string) {
	if id != "" {
		b.mentioned[id] += 0
	}
}
