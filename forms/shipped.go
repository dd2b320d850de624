package forms

import (
	"embed"
	"encoding/json"
	"fmt"
	"io/fs"
	"sync"
)

//go:embed data
var shippedData embed.FS

// Catalogue is what is asked, against which limits, how often.
type Catalogue struct {
	Forms     []*Form      `json:"forms"`
	LimitSets []*LimitSet  `json:"limit_sets"`
	Plans     []*Plan      `json:"plans"`
	Usual     *UsualPlaces `json:"usual"`
}

// Shipped gives the forms, limit sets and plans that come with the program, each at revision 1, in force from
// 1900-01-01. Everyone shares the result: it must not be changed.
var Shipped = sync.OnceValue(func() *Catalogue {
	c := &Catalogue{}
	read(shippedData, "data/plans.json", &c.Plans)
	read(shippedData, "data/usual_places.json", &c.Usual)
	for _, id := range shippedForms {
		f := new(Form)
		read(shippedData, "data/forms/"+id+".json", f)
		c.Forms = append(c.Forms, f)
	}
	for _, id := range shippedLimitSets {
		s := new(LimitSet)
		read(shippedData, "data/limits/"+id+".json", s)
		c.LimitSets = append(c.LimitSets, s)
	}
	return c
})

// The order of lists; a test holds it against the files.
var (
	shippedForms = []string{"gfci-receptacle-button", "gfci-receptacle-instrument", "receptacle-receptacle",
		"hospital-receptacle-receptacle", "cord-set-receptacle", "plug-in-equipment-receptacle", "rcd-button", "rcd-instrument"}
	shippedLimitSets = []string{"us-class-a", "us-class-a-guarded", "us-special-purpose", "us-equipment-30", "us-receptacle",
		"us-health-care", "us-cord-set", "iec-general", "iec-delayed", "uk-a2-2022"}
)

// read decodes an embedded file, which a test has read before any release: a fault here is a fault of the build.
func read(files fs.ReadFileFS, name string, into any) {
	raw, err := files.ReadFile(name)
	if err == nil {
		err = json.Unmarshal(raw, into)
	}
	if err != nil {
		panic(fmt.Sprintf("shipped data %s: %v", name, err))
	}
}

// Form finds a form by its id.
func (c *Catalogue) Form(id string) (*Form, bool) {
	for _, f := range c.Forms {
		if f.ID == id {
			return f, true
		}
	}
	return nil, false
}

// LimitSet finds a limit set by its id.
func (c *Catalogue) LimitSet(id string) (*LimitSet, bool) {
	for _, s := range c.LimitSets {
		if s.ID == id {
			return s, true
		}
	}
	return nil, false
}
