package store

import (
	"cmp"
	"encoding/json"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
)

// Pace is how long one test takes at a site, with the way to it.
type Pace struct {
	Minutes float64
	From    int // how many intervals it is the median of; 0: the program's estimate
}

// What counts as going from one test to the next: less is two entries of one moment, more is a pause.
const (
	paceLeast = 10 * time.Second
	paceMost  = 20 * time.Minute
	paceDays  = 400  // how far back is looked
	paceTests = 3000 // at most so many of the newest
	paceFew   = 12   // fewer intervals say nothing yet
)

// Pace reckons, by task, the median time between consecutive entries of one person on one day, of phones alone: what was
// typed in afterwards has no moments of its own. Tasks of which the site says too little have the program's estimate.
func (v *View) Pace(site string) (map[string]Pace, error) {
	sv, list, err := v.siteHistory(site, forms.NoDay, forms.NoDay)
	if err != nil {
		return nil, err
	}
	if at, _ := slices.BinarySearchFunc(list, sv.today-paceDays, func(d dayOf, day forms.Day) int { return cmp.Compare(d.day, day) }); at > 0 {
		list = list[at:]
	}
	list = list[max(0, len(list)-paceTests):]
	type made struct {
		by, task string
		day      forms.Day
		at       time.Time
	}
	var all []made
	for _, p := range list {
		r, _, _, err := readBook(v.tx, p.seq)
		if err != nil {
			return nil, err
		}
		var body struct{ Form, Source string }
		if json.Unmarshal(r.Body, &body) != nil || body.Source != "phone" {
			continue
		}
		_, task, _ := strings.Cut(body.Form, "/")
		all = append(all, made{r.By, task, p.day, r.At})
	}
	slices.SortFunc(all, func(a, b made) int { return cmp.Or(cmp.Compare(a.by, b.by), a.at.Compare(b.at)) })
	gaps := map[string][]float64{}
	for i := 1; i < len(all); i++ {
		a, b := all[i-1], all[i]
		if took := b.at.Sub(a.at); a.by == b.by && a.day == b.day && took >= paceLeast && took <= paceMost {
			gaps[b.task] = append(gaps[b.task], took.Minutes())
		}
	}
	out := map[string]Pace{}
	for _, task := range forms.Tasks() {
		out[task] = Pace{Minutes: forms.DefaultMinutes(task)}
		if g := gaps[task]; len(g) >= paceFew {
			slices.Sort(g)
			out[task] = Pace{Minutes: (g[(len(g)-1)/2] + g[len(g)/2]) / 2, From: len(g)}
		}
	}
	return out, nil
}
