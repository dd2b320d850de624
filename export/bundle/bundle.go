// Package bundle writes what an auditor takes away, and checks it. A bundle is a zip file:
//
//	READ-ME.txt          what it is, for whoever opens it
//	CHECKING.txt         the steps of the check, for somebody who writes a checker of their own
//	verify.html          a checker for a browser, which opens it from the folder and needs no network
//	workbook.xlsx        made from the records below and from nothing else
//	bundle.json          Doc: whose records, which, and the files with their SHA-256
//	head.txt             the signed head that covers all of it
//	key.txt              the public key
//	records/LOG.jsonl    the exact bytes of every record of a log, one a line, in the order of the log
//	stamps/LOG.txt       their stamps, one a line
//	tree/LOG.txt         their leaf hashes in hexadecimal, one a line: they name the record that was changed
//	refusals.json        what was refused, with its bytes
//	grants.json          who might do what: grant.set of the office log, each with its proof
//	restores.json        where a backup took the book's place: book.restored of the office log, each with its proof
//	earlier.json         heads signed earlier, with the lines of these logs: history was not rewritten
//	people.json          names, as the organisation states them
//	photos/SHA256.jpg    photos that entries and defects name
//	certificates/SHA256.pdf  certificates of the instruments
//
// The log of every site is there whole, and so is org; the period only chooses the rows of the workbook. Trees, lines and
// signatures are checked by store/proof; the workbook by making it anew from the records and comparing every cell.
package bundle

import (
	"time"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/proof"
)

// Names of files in a bundle.
const (
	docFile      = "bundle.json"
	headFile     = "head.txt"
	keyFile      = "key.txt"
	refusalsFile = "refusals.json"
	grantsFile   = "grants.json"
	restoresFile = "restores.json"
	earlierFile  = "earlier.json"
	peopleFile   = "people.json"
	workbookFile = "workbook.xlsx"
	readmeFile   = "READ-ME.txt"
	stepsFile    = "CHECKING.txt"
	pageFile     = "verify.html"
)

func recordsName(log string) string { return "records/" + log + ".jsonl" }
func stampsName(log string) string  { return "stamps/" + log + ".txt" }
func treeName(log string) string    { return "tree/" + log + ".txt" }

// Doc is bundle.json. Only head.txt is signed; everything here is held against it.
type Doc struct {
	Tripwell     string    `json:"tripwell"` // "bundle"
	V            int       `json:"v"`        // 1
	Organisation string    `json:"organisation"`
	Org          string    `json:"org"`
	Store        string    `json:"store"`
	Epoch        int       `json:"epoch"`
	Demo         bool      `json:"demo"`
	Judge        int       `json:"judge"` // JudgeVersion that made the workbook
	AsOf         time.Time `json:"as_of"`
	From         string    `json:"from"` // test days; "" is open
	To           string    `json:"to"`
	AllSites     bool      `json:"all_sites"`
	Sites        []Site    `json:"sites"`
	Logs         []Line    `json:"logs"`      // of the sites, then org
	Office       *Line     `json:"office"`    // its records are not here, but for those of grants.json
	NoPhotos     []string  `json:"no_photos"` // named, and not arrived when the bundle was made
	NoFiles      []string  `json:"no_certificates"`
	Files        []File    `json:"files"` // all but bundle.json
}

// Site is a site of the bundle; its log has its id.
type Site struct {
	ID   string `json:"id"`
	Code string `json:"code"`
	Name string `json:"name"`
}

// Line says how long a log is and what its root is, and proves that a head covers that.
type Line struct {
	Log   string   `json:"log"`
	Size  int64    `json:"size"`
	Root  string   `json:"root"`  // base64
	Index int64    `json:"index"` // of the line among those of the head, from 0
	Proof []string `json:"proof"` // base64
	Kept  *kept    `json:"kept,omitempty"`
}

// kept says, of a log under a head that was signed before a restore, how many of its records the book still has; its proof leads
// from the root of those to the root of the line.
type kept struct {
	Size  int64    `json:"size"`
	Proof []string `json:"proof"` // base64
}

// File is a file of the bundle.
type File struct {
	Name   string `json:"name"`
	Size   int64  `json:"size"`
	SHA256 string `json:"sha256"`
}

// refusal is one of refusals.json.
type refusal struct {
	Log      string    `json:"log"`
	Record   string    `json:"record"` // id of the record that was refused, "" where it had none
	SHA256   string    `json:"sha256"`
	From     string    `json:"from"`
	N        int64     `json:"n"`
	Code     string    `json:"code"`
	Text     string    `json:"text"`
	Received time.Time `json:"received"`
	Bytes    []byte    `json:"bytes"`            // base64
	Sealed   bool      `json:"sealed,omitempty"` // the owner had the bytes dropped
}

// officeRecord is one of grants.json or restores.json.
type officeRecord struct {
	Pos    int64    `json:"pos"`
	Stamp  string   `json:"stamp"`
	Record string   `json:"record"`
	Proof  []string `json:"proof"`
}

// earlier is one of earlier.json.
type earlier struct {
	Head string `json:"head"`
	Logs []Line `json:"logs"`
}

// person is one of people.json.
type person struct {
	ID           string   `json:"id"`
	Name         string   `json:"name"`
	Role         string   `json:"role"`
	Active       bool     `json:"active"`
	Licence      string   `json:"licence,omitempty"`
	LicenceUntil string   `json:"licence_until,omitempty"` // day
	May          []string `json:"may,omitempty"`
}

// Ask says which part of a store goes into a bundle.
type Ask struct {
	Site         string    // id or code; "" = every site of the scope
	From, To     forms.Day // rows of the workbook, test days, both included; NoDay: open
	Organisation string
	Progress     func(done, total int64) // records written and read again; may be nil
}

func lineOf(l proof.Line) Line {
	return Line{Log: l.Log, Size: l.Size, Root: l.Root.String(), Index: l.Index, Proof: texts(l.Proof)}
}

func (l Line) line() (proof.Line, error) {
	out := proof.Line{LogRoot: proof.LogRoot{Log: l.Log, Size: l.Size}, Index: l.Index}
	var err error
	if out.Root, err = proof.ParseHash(l.Root); err != nil {
		return out, err
	}
	out.Proof, err = hashes(l.Proof)
	return out, err
}

func texts(list []proof.Hash) []string {
	out := make([]string, len(list))
	for i, h := range list {
		out[i] = h.String()
	}
	return out
}

func hashes(list []string) (out []proof.Hash, err error) {
	for _, t := range list {
		h, err := proof.ParseHash(t)
		if err != nil {
			return nil, err
		}
		out = append(out, h)
	}
	return out, nil
}

func personOf(p store.Person) person {
	out := person{ID: p.ID, Name: p.Name, Role: p.Role, Active: p.Active, Licence: p.Licence, May: p.May}
	if p.LicenceUntil != nil {
		out.LicenceUntil = p.LicenceUntil.String()
	}
	return out
}

// stored leaves out what is no day: the check then finds the cell that says more.
func (p person) stored() store.Person {
	out := store.Person{ID: p.ID, Name: p.Name, Role: p.Role, Active: p.Active, Licence: p.Licence, May: p.May}
	if day, err := dayOf(p.LicenceUntil); err == nil && day != forms.NoDay {
		out.LicenceUntil = &day
	}
	return out
}
