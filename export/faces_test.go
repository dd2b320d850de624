package export

import (
	"bytes"
	"context"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
	"tripwell/store"
)

// rowsByHeading reads a sheet of a workbook as rows by heading.
func rowsByHeading(t *testing.T, raw []byte, sheet string) (out []map[string]string) {
	t.Helper()
	f, err := excelize.OpenReader(bytes.NewReader(raw))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := f.GetRows(sheet)
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range rows[1:] {
		one := map[string]string{}
		for i, cell := range row {
			one[rows[0][i]] = cell
		}
		out = append(out, one)
	}
	return out
}

// The two faces of an outlet are measured apart, the worse decides, and the face is told all the way: the verdict, the defect, the
// register, the workbook. NFPA 99-2012, 6.3.3.2 item 4: 115 g on the ground blade of each.
func TestFaces_FromTheFormToTheWorkbook(t *testing.T) {
	h := newHouse(t, "")
	h.bring(t, "site,site_name,zone,room,place,kind,faces,equipment_ground\nELM-4,Elm,UTC,Ward 2,Bed 1,hospital-receptacle,2,yes\nELM-4,Elm,UTC,Ward 2,Bed 2,gfci-receptacle,2,none-permitted\n")
	devices := h.devices(t, "ELM-4")
	duplex, bare := devices[0], devices[1]
	test := func(d store.DeviceRow, form string, given, readings map[string]any, series ...map[string]any) string {
		t.Helper()
		given["kind"] = d.Kind
		body := map[string]any{"form": form, "given": given, "readings": readings, "source": "office"}
		if len(series) > 0 {
			body["series"] = series
		}
		got, err := h.Append(context.Background(), store.Draft{Kind: "entry.made", Log: d.Site, Subject: d.ID, By: h.ID(), Body: body})
		if err != nil {
			t.Fatal(err)
		}
		return got[0].ID
	}
	at := func(face string, g float64) map[string]any {
		return map[string]any{"at": map[string]any{"face": face}, "retention_g": map[string]any{"unit": "g", "value": g}}
	}
	sound := func(more map[string]any) map[string]any {
		out := map[string]any{"condition": "sound", "found": "on", "wiring": "correct", "ground_continuous": "yes"}
		for k, v := range more {
			out[k] = v
		}
		return out
	}
	weak := test(duplex, "hospital-receptacle/receptacle", map[string]any{"faces": 2}, sound(nil), at("upper", 140), at("lower", 90))
	marked := map[string]any{"wiring": "open-ground", "button_trips": "yes", "button_resets": "yes", "marking_present": "yes"}
	legal := test(bare, "gfci-receptacle/instrument", map[string]any{"equipment_ground": "none-permitted"}, sound(marked))
	marked["marking_present"] = "no"
	unmarked := test(bare, "gfci-receptacle/instrument", map[string]any{"equipment_ground": "none-permitted"}, sound(marked))

	err := h.View(everything, func(v *store.View) error {
		for entry, want := range map[string]string{weak: forms.Fail, legal: forms.Pass, unmarked: forms.Fail} {
			e, err := v.Entry(entry)
			if err != nil {
				return err
			}
			if e.Verdict.Result != want {
				t.Errorf("%s: %s, want %s: %+v", e.Form, e.Verdict.Result, want, e.Verdict.Findings)
			}
		}
		defects, err := v.Defects(store.DefectAsk{Site: "ELM-4", On: forms.DayOf(h.now)})
		if err != nil {
			return err
		}
		causes := map[string]string{}
		for _, d := range defects {
			causes[d.Device.ID] = d.Cause
		}
		if causes[duplex.ID] != "retention_g" || causes[bare.ID] == "" {
			t.Errorf("open defects: %v", causes)
		}
		gaps, _, err := v.ProtectionGaps("ELM-4", forms.DayOf(h.now))
		found := false
		for _, g := range gaps {
			found = found || g.Why == store.GapMarking && g.Device.ID == bare.ID && g.Marking == "no-equipment-ground"
		}
		if !found {
			t.Errorf("its marking was not seen there, and the protection page does not say so: %+v", gaps)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}

	var book bytes.Buffer
	if err := WorkbookOf(&book, h.Store, everything, WorkbookAsk{Organisation: "Test", From: forms.NoDay, To: forms.NoDay}); err != nil {
		t.Fatal(err)
	}
	faces := map[string]string{}
	for _, row := range rowsByHeading(t, book.Bytes(), "Readings") {
		if row["Entry id"] == weak && strings.Contains(row["Conditions"], "face") {
			faces[row["Conditions"]] = row["Verdict"]
		}
	}
	if len(faces) != 2 {
		t.Errorf("the workbook tells of the faces %v", faces)
	}
	for conditions, verdict := range faces {
		if strings.Contains(strings.ToLower(conditions), "lower") != strings.Contains(verdict, "Fail") {
			t.Errorf("%s: %s", conditions, verdict)
		}
	}
	register := rowsByHeading(t, book.Bytes(), "Register")
	if len(register) != 2 {
		t.Errorf("the register has %d rows", len(register))
	}
	for _, row := range register {
		if row["Faces"] != "2" || row["Spot"] == "Bed 2" && row["Equipment ground"] != "none-permitted" {
			t.Errorf("the register says %v", row)
		}
	}
}
