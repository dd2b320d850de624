package export

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"tripwell/export/intake"
	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
)

// take imports a file into a house.
func (h *house) take(t *testing.T, name string, raw []byte, m register.Mapping) register.Report {
	t.Helper()
	h.now = h.now.Add(time.Minute)
	report, err := register.Import(context.Background(), h.Store, name, bytes.NewReader(raw), register.Options{By: h.ID(), Mapping: m}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return report
}

// said is everything a register says, one line a device in some order, without the ids of the store that holds it.
func (h *house) said(t *testing.T) []string {
	t.Helper()
	var lines []string
	err := h.View(everything, func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		for _, s := range sites {
			circuits, err := v.Circuits(s.ID)
			if err != nil {
				return err
			}
			for row, err := range v.Devices(s.ID) {
				if err != nil {
					return err
				}
				d, err := v.Device(row.ID, forms.DayOf(h.now))
				if err != nil {
					return err
				}
				delete(d.Fields, "place")
				delete(d.Fields, "circuit")
				place := d.Place
				place.ID, place.Site = "", ""
				var circuit map[string]any
				for _, c := range circuits {
					if c.Panel == d.Panel && c.Numbers == d.Circuit && d.Circuit != "" {
						circuit = c.Fields
						delete(circuit, "panel")
					}
				}
				if source, ok := d.Fields["fed_by"].(string); ok { // ids are each organisation's own
					fed, err := v.Device(source, 0)
					if err != nil {
						return err
					}
					d.Fields["fed_by"] = PlaceText(fed.Place) + fmt.Sprint(fed.Fields["where"], fed.Fields["serial"], fed.Circuit)
				}
				if at, ok := d.Fields["at_site"].(string); ok {
					there, err := v.Site(at)
					if err != nil {
						return err
					}
					d.Fields["at_site"] = there.Code
				}
				line, err := json.Marshal([]any{s.Code, s.Name, s.Zone, s.Standard, s.Address, place, d.Tag, d.Panel, d.Circuit, circuit, d.Fields})
				if err != nil {
					return err
				}
				lines = append(lines, string(line))
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	slices.Sort(lines)
	return lines
}

// randomRegister types a register with every column, and texts that have broken spreadsheets before.
func randomRegister(r *rand.Rand) []byte {
	pick := func(list ...string) string { return list[r.IntN(len(list))] }
	text := func(i int) string {
		return pick("", "plain", "=1+1", "+49 30", "-", "@home", "a,b;c", `2" box`, "_x0041_", "käse & <b>", "'quoted", "1/2", "2026-03-04x", "TRUE", "Ω≤5", "no", "14/16") + pick("", fmt.Sprint(" ", i))
	}
	head := register.ColumnNames()
	head = slices.DeleteFunc(head, func(s string) bool { return s == "panel_circuit" || s == "status" || s == "tag" })
	before := map[string]string{} // the spot of the row before, by site
	var out bytes.Buffer
	w := csv.NewWriter(&out)
	_ = w.Write(head)
	for i := range 5 + r.IntN(40) {
		site := pick("ELM-4", "OAK-1")
		kind := pick(forms.Kinds()...)
		row := make([]string, len(head))
		circuit := r.IntN(4) > 0
		for c, name := range head {
			switch name {
			case "site":
				row[c] = site
			case "site_name":
				row[c] = map[string]string{"ELM-4": "Elm Hall", "OAK-1": "=Oak"}[site]
			case "zone":
				row[c] = "America/Denver"
			case "standard":
				row[c] = "NEC"
			case "address":
				row[c] = "1 Lane, " + site
			case "kind":
				row[c] = kind
			case "place":
				row[c] = fmt.Sprintf("Spot %d %s", i, text(i))
			case "order":
				row[c] = fmt.Sprint(i + 1)
			case "panel":
				row[c] = "LP-1"
			case "circuit":
				row[c] = pick(fmt.Sprint(i+1), fmt.Sprintf("%d/%d", i+1, i+3))
			case "breaker_a", "poles", "voltage_v", "rating_a", "nominal_v", "rated_residual_ma", "faces", "length_m":
				row[c] = pick("", "20", "0.3", "16.5", "1000")
			case "supply":
				row[c] = pick("", "grounded", "isolated")
			case "circuit_standard":
				row[c] = pick("", "NEC", "IEC")
			case "equipment_ground":
				row[c] = pick("", "yes", "none-permitted")
			case "earthing", "supply_edition":
				trait, _ := forms.TraitNamed(name)
				row[c] = pick(append([]string{""}, trait.Options...)...)
			case "delayed", "no_neutral", "distribution_circuit", "special_location", "double_insulated", "new_construction", "quiet_ground", "locking":
				row[c] = pick("", "yes", "no")
			case "installed":
				row[c] = pick("", "2021-02-28", "2019-12-31")
			case "limit_set":
				row[c] = pick("", "us-class-a")
			case "waveform":
				row[c] = pick("", "ac", "pulsating-dc")
			case "kept_at", "now_at":
			case "hangs_on": // a device of an earlier row of its site, also one that is told by its place alone
				row[c] = pick("", before[site])
			case "usual_place":
				row[c] = pick("", "kitchen", "Bathrooms", "none")
			default:
				row[c] = text(i)
			}
			if !circuit && slices.Contains([]string{"panel", "circuit", "breaker_a", "poles", "voltage_v", "conductor", "supply", "circuit_standard"}, name) {
				row[c] = ""
			}
		}
		if before[site] = row[slices.Index(head, "place")]; forms.IsPortable(kind) {
			before[site] = "" // feeds no outlet of the building
		}
		_ = w.Write(row)
	}
	w.Flush()
	return out.Bytes()
}

// What goes out as a workbook comes in again as the same register: on an empty store all of it, on its own none.
func roundTrip(t *testing.T, name string, raw []byte, m register.Mapping, least int) {
	first, second := newHouse(t, ""), newHouse(t, "")
	report := first.take(t, name, raw, m)
	if report.Added < least {
		t.Fatalf("only %d devices came in: %v", report.Added, report.Problems)
	}
	if again := first.take(t, name, raw, m); again.Records != 0 {
		t.Errorf("the same file again made %d records", again.Records)
	}
	var book bytes.Buffer
	if err := WorkbookOf(&book, first.Store, everything, WorkbookAsk{Organisation: "Test"}); err != nil {
		t.Fatal(err)
	}
	came := second.take(t, "workbook.xlsx", book.Bytes(), register.Mapping{})
	if came.Added != report.Added || came.Skipped != 0 {
		t.Errorf("of %d devices %d came in again: %v", report.Added, came.Added, came.Problems)
	}
	want, got := first.said(t), second.said(t)
	for i := range want {
		if i >= len(got) || got[i] != want[i] {
			t.Fatalf("device %d of %d differs:\n%s\n%s", i, len(want), want[i], strings.Join(got[min(i, len(got)):min(i+1, len(got))], ""))
		}
	}
	if own := first.take(t, "workbook.xlsx", book.Bytes(), register.Mapping{}); own.Records != 0 {
		t.Errorf("its own workbook changed the register: %d records, %v", own.Records, own.Problems)
	}
}

func TestRegister_RoundTripThroughTheWorkbook(t *testing.T) {
	for name, c := range map[string]struct {
		mapping register.Mapping
		least   int
	}{
		"register.csv":        {register.Mapping{}, 41},
		"register-messy.xlsx": {register.Mapping{Columns: map[string]string{"Which one": "place"}, Kinds: map[string]string{"Thing with button": "gfci-receptacle"}, Dates: intake.MDY, Zone: "America/Chicago"}, 430},
		"register-messy.csv":  {register.Mapping{Zone: "Europe/Berlin", Kinds: map[string]string{"FI/LS": "rcbo"}}, 60},
	} {
		t.Run(name, func(t *testing.T) {
			raw, err := os.ReadFile("../testdata/" + name)
			if err != nil {
				t.Fatal(err)
			}
			roundTrip(t, name, raw, c.mapping, c.least)
		})
	}
	seeds := 12
	if testing.Short() {
		seeds = 3
	}
	for seed := range seeds {
		t.Run(fmt.Sprintf("seed %d", seed), func(t *testing.T) {
			roundTrip(t, "random.csv", randomRegister(rand.New(rand.NewPCG(uint64(seed), 3))), register.Mapping{}, 3)
		})
	}
}

// What hangs on what, the kind of place and where an item is now go out and come in again, by tag, by place and by the code of a site.
func TestRegister_RoundTripOfTheMap(t *testing.T) {
	raw := []byte("site,site_name,zone,room,place,kind,panel,circuit,serial,tag,hangs_on,usual_place,now_at\n" +
		"ELM-4,Elm,UTC,Pantry,Door,protected-receptacle,LP-2,14,,,By the sink,Kitchens,\n" + // named before its own row
		"ELM-4,Elm,UTC,Pantry,By the sink,gfci-receptacle,LP-2,14,,K7QM2P3,,none,\n" +
		"ELM-4,Elm,UTC,Pantry,Window,protected-receptacle,LP-2,14,,,K7Q-M2P-3,,\n" +
		"ELM-4,Elm,UTC,Pantry,Hatch,protected-receptacle,LP-2,14,,,Pantry Door,,\n" +
		"ELM-4,Elm,UTC,Pantry,Shelf,receptacle,LP-2,14,,,Nowhere,Moon base,\n" +
		"ELM-4,Elm,UTC,,,portable-gfci,,,PG-7,,,,OAK-1\n" +
		"OAK-1,Oak,UTC,Hall,Door,receptacle,,,,,,,ELM-4\n")
	first := newHouse(t, "")
	report := first.take(t, "map.csv", raw, register.Mapping{})
	if report.Added != 7 {
		t.Fatalf("added %d: %v", report.Added, report.Problems)
	}
	var columns []string
	for _, p := range report.Problems {
		columns = append(columns, p.Column)
	}
	slices.Sort(columns)
	if !slices.Equal(columns, []string{"hangs_on", "now_at", "now_at", "usual_place"}) { // OAK-1 is made by a later row of the same file
		t.Errorf("got problems in %v: %v", columns, report.Problems)
	}
	if again := first.take(t, "map.csv", raw, register.Mapping{}); again.Records != 1 { // now the other site is there
		t.Errorf("the same file again made %d records: %v", again.Records, again.Problems)
	}
	said := strings.Join(first.said(t), "\n")
	for _, want := range []string{`"fed_by":`, `"usual":"kitchen"`, `"at_site":`} {
		if !strings.Contains(strings.ReplaceAll(said, `"Usual":"kitchen"`, `"usual":"kitchen"`), want) {
			t.Errorf("the store does not hold %s:\n%s", want, said)
		}
	}
	if strings.Count(said, `"fed_by":`) != 3 {
		t.Errorf("%d devices hang on another, want 3", strings.Count(said, `"fed_by":`))
	}
	var book bytes.Buffer
	if err := WorkbookOf(&book, first.Store, everything, WorkbookAsk{Organisation: "Test"}); err != nil {
		t.Fatal(err)
	}
	if own := first.take(t, "workbook.xlsx", book.Bytes(), register.Mapping{}); own.Records != 0 || len(own.Problems) != 0 {
		t.Errorf("its own workbook changed the register: %d records, %v", own.Records, own.Problems)
	}
	second := newHouse(t, "")
	second.take(t, "workbook.xlsx", book.Bytes(), register.Mapping{})
	second.take(t, "workbook.xlsx", book.Bytes(), register.Mapping{}) // the site an item is at may come after the item
	want, got := first.said(t), second.said(t)
	if strings.Join(want, "\n") != strings.Join(got, "\n") {
		t.Errorf("came in again otherwise:\n%s\n\n%s", strings.Join(want, "\n"), strings.Join(got, "\n"))
	}
}
