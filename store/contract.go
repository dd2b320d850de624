package store

import (
	"iter"
	"time"

	"tripwell/forms"
)

// Site is a site with its merged fields.
type Site struct {
	ID, Code, Name, Zone, Address string
	Standard                      string // NEC | IEC
	Conflicts                     []Conflict
}

// Location loads the site's time zone, UTC where it is unknown.
func (s Site) Location() *time.Location { panic("contract") }

// Conflict is a value that lost to a concurrent one (FORMATS 5).
type Conflict struct {
	Field, Value, Winner string
	By                   string
	At                   time.Time
	Record               string
}

// SiteSums counts one site on one day.
type SiteSums struct {
	Site       Site
	Devices    int
	Overdue    int
	DueSoon    int // due within the 31 days after the day asked for, the day included
	Failed     int // devices whose last test of some task is a fail
	NextDay    forms.Day
	NextTask   string
	LastFailed []DeviceRow // at most 5, newest first
}

// Place is where a fixed device sits. Name is the spot ("Pantry, by the sink").
type Place struct {
	ID, Site, Building, Floor, Room, Name string
	Order                                 float64 // walking order within the room
	CriticalLoad                          string
}

// Label gives "Ground floor · Kitchen" style context without the spot's name.
func (p Place) Context() string { panic("contract") }

// DeviceRow is a device as lists show it.
type DeviceRow struct {
	ID, Site, SiteCode, Kind, Tag string
	Place                         Place
	Panel, Circuit                string // "LP-2", "14"
	Make, Model                   string
	RatingA, RatedResidualMA      float64
	Installed                     forms.Day
	Retired                       bool
	Last                          map[string]LastTest // by task
	Due                           []Due
}

// LastTest is the newest entry of a task that says something, not-tested included.
type LastTest struct {
	Entry  string
	Day    forms.Day
	Result string
}

// Due is one date of one device. State is decided for the day asked: upcoming | due | in-grace | overdue | never-tested.
type Due struct {
	Task  string
	Due   forms.Day
	Last  forms.Day // NoDay: never
	State string
	Plan  string
}

// Device is everything the device page shows.
type Device struct {
	DeviceRow
	SiteName  string
	Fields    map[string]any // merged register fields
	Conflicts []Conflict
	Earlier   []DeviceRow // earlier devices of the same place
	TagClash  []string    // other live bindings of the same tag (subject ids)
}

// Entry is one test with all that was said of it since.
type Entry struct {
	ID, Device, Site string
	Form, Task       string
	Day              forms.Day // test day in the site's zone (FORMATS 6)
	At, Received     time.Time
	By, From         string
	ReadBy, TypedBy  string
	Source           string // phone | office | paper | spreadsheet | instrument-file | imported
	Imported         bool
	Note             string
	Log              string
	Pos              int64
	Body             forms.Entry   // after corrections
	Verdict          forms.Verdict // under the limit revision in force on the test day
	LimitSet         string
	LimitRev         int
	Shown            *Shown
	Flags            []Flag
	Corrections      []Correction // oldest first; the last by (clock, id) is in force
	Withdrawn        *Correction
	Original         forms.Entry
}

// Shown is what the phone told the tester.
type Shown struct {
	Result   string `json:"result"`
	LimitRev int    `json:"limit_rev"`
	Judge    int    `json:"judge"`
}

// Correction is a later record about an entry.
type Correction struct {
	Record   string
	By       string
	At       time.Time
	Reason   string
	Body     forms.Entry
	InForce  bool
	Received time.Time
}

// Flag is something to look at that is no verdict: code names a word "flag.CODE", Detail fills it in.
// Codes: clock (device clock off), late (received long after), differs-shown, differs-register, calibration-expired,
// no-instrument, access-ended, n-gap, n-reused.
type Flag struct{ Code, Detail string }

// DueRow is a due date with the device it belongs to, for lists.
type DueRow struct {
	Device DeviceRow
	Due
}

// DueAsk filters a due list. Until NoDay = all dates.
type DueAsk struct {
	On    forms.Day
	Until forms.Day
	Site  string // id; "" = all of the scope
	Task  string
	Limit int // 0 = all
}

func (v *View) Sites() ([]Site, error)                               { panic("contract") }
func (v *View) Site(idOrCode string) (Site, error)                   { panic("contract") }
func (v *View) SiteSums(site string, on forms.Day) (SiteSums, error) { panic("contract") }
func (v *View) Devices(site string) iter.Seq2[DeviceRow, error]      { panic("contract") } // walking order: building, floor, room, order, name (natural numbers)
func (v *View) Device(id string, on forms.Day) (Device, error)       { panic("contract") }
func (v *View) Places(site string) ([]Place, error)                  { panic("contract") }
func (v *View) Entries(device string) ([]Entry, error)               { panic("contract") } // newest first
func (v *View) Entry(id string) (Entry, error)                       { panic("contract") }
func (v *View) SiteEntries(site string, from, to forms.Day) iter.Seq2[Entry, error] {
	panic("contract")
}                                                       // by test day, then position; NoDay = open end
func (v *View) Due(ask DueAsk) iter.Seq2[DueRow, error] { panic("contract") } // by date
func (v *View) Tag(tag string) ([]TagHolder, error)     { panic("contract") }
func (v *View) Forms() ([]*forms.Form, error)           { panic("contract") } // newest revision of each
func (v *View) LimitSets() ([]*forms.LimitSet, error)   { panic("contract") } // every revision, by id then revision
func (v *View) Plans() ([]*forms.Plan, error)           { panic("contract") }
func (v *View) Instruments() ([]Instrument, error)      { panic("contract") }

// Snapshot is what a phone takes along of one site, read in one transaction with the cursor that continues it.
type Snapshot struct {
	Site        SnapshotSite      `json:"site"`
	Cursor      string            `json:"cursor"`
	AsOf        time.Time         `json:"as_of"`
	Today       forms.Day         `json:"today"`
	Places      []SnapshotPlace   `json:"places"`
	Devices     []SnapshotDevice  `json:"devices"` // walking order
	Forms       []*forms.Form     `json:"forms"`
	LimitSets   []*forms.LimitSet `json:"limit_sets"` // revision in force today of each
	Instruments []Instrument      `json:"instruments"`
}

type SnapshotSite struct {
	ID       string `json:"id"`
	Code     string `json:"code"`
	Name     string `json:"name"`
	Zone     string `json:"zone"`
	Standard string `json:"standard"`
}

type SnapshotPlace struct {
	ID           string `json:"id"`
	Building     string `json:"building,omitempty"`
	Floor        string `json:"floor,omitempty"`
	Room         string `json:"room,omitempty"`
	Name         string `json:"name"`
	CriticalLoad string `json:"critical_load,omitempty"`
}

type SnapshotDevice struct {
	ID      string         `json:"id"`
	Kind    string         `json:"kind"`
	Place   string         `json:"place,omitempty"`
	Tag     string         `json:"tag,omitempty"`
	Panel   string         `json:"panel,omitempty"`
	Circuit string         `json:"circuit,omitempty"`
	Supply  string         `json:"supply,omitempty"`
	Fields  map[string]any `json:"fields"`
	// Last by task: newest test, with its numbers for the dashed mark on the scale.
	Last map[string]SnapshotLast `json:"last,omitempty"`
	Due  []SnapshotDue           `json:"due,omitempty"`
}

type SnapshotLast struct {
	Entry    string             `json:"entry"`
	Day      forms.Day          `json:"day"`
	Result   string             `json:"result"`
	Readings map[string]float64 `json:"readings,omitempty"`
}

type SnapshotDue struct {
	Task  string    `json:"task"`
	Due   forms.Day `json:"due"`
	Last  forms.Day `json:"last,omitempty"`
	State string    `json:"state"`
}

// Snapshot reads what a phone takes along of a site.
func (v *View) Snapshot(site string, on forms.Day) (Snapshot, error) { panic("contract") }

// TagHolder is one live binding of a tag: a place (with its present device) or a portable item.
type TagHolder struct {
	Subject, Site, Device string
}

// Instrument is a test instrument with its merged fields.
type Instrument struct {
	ID, Name, Serial string
	CalibrationDue   forms.Day
	Accuracy         map[string]forms.Accuracy
	Ramp             *forms.Ramp
	Retired          bool
}
