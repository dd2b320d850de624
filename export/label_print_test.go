package export

import (
	"bytes"
	"image"
	"image/png"
	"math"
	"strings"
	"testing"
)

// printedAt is the resolution pages are looked at: one dot is 0.127 mm.
const printedAt = 200

// TestLabels_EverySheetAsPrinted draws one full page of every sheet and two rolls, reads every code back and measures where it
// stands. The dimensions are those of the common label templates, seen second-hand.
func TestLabels_EverySheetAsPrinted(t *testing.T) {
	sizes := map[string]Printing{"roll 50x25": {}, "roll 25x25": {}}
	for name := range sizes {
		size, err := Roll(strings.TrimPrefix(name, "roll "))
		if err != nil {
			t.Fatal(err)
		}
		sizes[name] = Printing{Sheet: size}
	}
	for _, name := range SheetNames() {
		size, err := SheetNamed(name)
		if err != nil {
			t.Fatal(err)
		}
		sizes[name] = Printing{Sheet: size, NudgeX: 0.4, NudgeY: -0.3}
	}
	for name, how := range sizes {
		t.Run(name, func(t *testing.T) { readSheet(t, how) })
	}
}

func readSheet(t *testing.T, how Printing) {
	labels := someLabels(how.Sheet.PerPage())
	labels[0].Spot = strings.Repeat("A very long name of a spot ", 8)
	labels[len(labels)-1].Context = strings.Repeat("WWWWWW", 20)
	var pdf bytes.Buffer
	if err := Labels(&pdf, how, labels); err != nil {
		t.Fatal(err)
	}
	pages := renderPages(t, pdf.Bytes(), printedAt)
	if len(pages) != 1 {
		t.Fatalf("got %d pages, want 1", len(pages))
	}
	how.Start = 1
	plan, err := planLabels(how.Sheet, labels[0].Address, DefaultLines(), "DEMO")
	if err != nil {
		t.Fatal(err)
	}
	symbol, module, err := codeIn(labels[0].Address, plan.box+1e-6)
	if err != nil {
		t.Fatal(err)
	}
	if module < 0.33 { // 4 dots of a 300 dpi printer, as the code's inventors advise
		t.Errorf("a module is %.3f mm", module)
	}
	for n, l := range labels {
		// Where the label lies: margins, pitch and nudge, counted here from the sheet's row of the table.
		s := how.Sheet
		x, y := s.Left+float64(n%s.Cols)*s.PitchX+how.NudgeX, s.Top+float64(n/s.Cols)*s.PitchY+how.NudgeY
		if got := decodeAt(t, pages[0], printedAt, x+plan.codeX, y+plan.codeY, plan.box); got != l.Address {
			t.Errorf("label %d: the code reads %q, want %q", n, got, l.Address)
		}
		gotX, gotY := firstInk(pages[0], printedAt, x+plan.codeX, y+plan.codeY, plan.box)
		wantX, wantY := x+plan.codeX+quietModules*module, y+plan.codeY+quietModules*module
		if math.Abs(gotX-wantX) > 0.2 || math.Abs(gotY-wantY) > 0.2 {
			t.Errorf("label %d: the code begins at %.2f, %.2f mm; want %.2f, %.2f", n, gotX, gotY, wantX, wantY)
		}
		if ink := inkBeyond(pages[0], printedAt, x, y, s); ink > 0 {
			t.Errorf("label %d: %d dark dots nearer than 0.5 mm to the label's edge", n, ink)
		}
		right := x + plan.codeX + plan.box - (quietModules-1)*module
		if ink := inkIn(pages[0], printedAt, right, y+plan.codeY, (quietModules-1.5)*module, plan.box); ink > 0 && symbol != nil {
			t.Errorf("label %d: %d dark dots in the quiet zone at the right of the code", n, ink)
		}
		if ink := inkIn(pages[0], printedAt, x+plan.textX, y+plan.top, plan.textW, plan.h-plan.top); ink < 30 {
			t.Errorf("label %d: nothing is printed beside the code", n)
		}
	}
}

func TestLabels_StartLeavesUsedLabelsEmpty(t *testing.T) {
	how := Printing{Sheet: Letter3x10, Start: 5}
	labels := someLabels(40)
	var pdf bytes.Buffer
	if err := Labels(&pdf, how, labels); err != nil {
		t.Fatal(err)
	}
	pages := renderPages(t, pdf.Bytes(), printedAt)
	if len(pages) != 2 {
		t.Fatalf("got %d pages, want 2", len(pages))
	}
	for n := range how.Start - 1 {
		_, x, y := how.Sheet.Position(n)
		if ink := inkIn(pages[0], printedAt, x, y, how.Sheet.LabelW, how.Sheet.LabelH); ink > 0 {
			t.Errorf("place %d was to stay empty and has %d dark dots", n+1, ink)
		}
	}
	for _, i := range []int{0, 25, 26, 39} {
		page, x, y := how.Sheet.Position(how.Start - 1 + i)
		if got := decodeAt(t, pages[page], printedAt, x, y, how.Sheet.LabelH); got != labels[i].Address {
			t.Errorf("label %d: the code reads %q, want %q", i, got, labels[i].Address)
		}
	}
}

func TestLabels_AlignmentShowsEveryEdge(t *testing.T) {
	how := Printing{Sheet: Letter3x10, NudgeX: 1}
	var pdf bytes.Buffer
	if err := Alignment(&pdf, how); err != nil {
		t.Fatal(err)
	}
	img := renderPages(t, pdf.Bytes(), printedAt)[0]
	for n := range how.Sheet.PerPage() {
		_, x, y := how.Sheet.Position(n)
		if ink := inkIn(img, printedAt, x+1-0.2, y+how.Sheet.LabelH*0.7, 0.4, 3); ink < 10 {
			t.Errorf("label %d: its left edge is not drawn where it was nudged to", n)
		}
	}
}

func TestLabels_MarkingsFillTheLabel(t *testing.T) {
	for _, name := range MarkingNames() {
		labels, err := MarkingLabels(name, 2)
		if err != nil {
			t.Fatal(err)
		}
		var pdf bytes.Buffer
		if err := Labels(&pdf, Printing{Sheet: Letter3x10}, labels); err != nil {
			t.Fatal(err)
		}
		img := renderPages(t, pdf.Bytes(), printedAt)[0]
		_, x, y := Letter3x10.Position(1)
		if ink := inkIn(img, printedAt, x+2, y+2, Letter3x10.LabelW-4, Letter3x10.LabelH-4); ink < 2000 {
			t.Errorf("%s: %d dark dots, that is no marking to be read from a distance", name, ink)
		}
		if ink := inkBeyond(img, printedAt, x, y, Letter3x10); ink > 0 {
			t.Errorf("%s: %d dark dots at the edge", name, ink)
		}
	}
	// NFPA 70, 406.4(D)(2)(c): both markings on a grounding receptacle that a GFCI feeds.
	both, err := MarkingLabels("both", 1)
	if err != nil || strings.Join(both[0].Marking, "|") != "GFCI PROTECTED|NO EQUIPMENT GROUND" {
		t.Errorf("got %v, %v", both, err)
	}
}

func TestLabelPicture_ReadsBack(t *testing.T) {
	l := someLabels(1)[0]
	l.Spot = `Tank <3> & "pump"`
	how := Printing{Sheet: Letter3x10}
	var raster, lines bytes.Buffer
	if err := LabelPNG(&raster, how, l); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&raster)
	if err != nil {
		t.Fatal(err)
	}
	if got := decodeAt(t, img.(*image.Gray), pictureDPI, 0, 0, how.Sheet.LabelH); got != l.Address {
		t.Errorf("the picture reads %q, want %q", got, l.Address)
	}
	if ink := inkIn(img, pictureDPI, 24, 1, 40, 8); ink < 1000 {
		t.Errorf("%d dark dots where the tag stands", ink)
	}
	if err := LabelSVG(&lines, how, l); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{`width="66.675mm"`, TagText(l.Tag), "Tank &lt;3&gt; &amp; &#34;pump&#34;", `shape-rendering="crispEdges"`} {
		if !strings.Contains(lines.String(), want) {
			t.Errorf("the picture in lines lacks %s", want)
		}
	}
}

func TestLabels_SmallAddressesAndLongOnesFindALevel(t *testing.T) {
	low := SheetSize{Name: "low", PageW: 60, PageH: 12.7, LabelW: 60, LabelH: 12.7, PitchX: 60, PitchY: 12.7, Cols: 1, Rows: 1}
	for _, host := range []string{"A.EXAMPLE", "TRIPWELL.A-RATHER-LONG-NAME.EXAMPLE", "TRIPWELL.A-NAME-SO-LONG-THAT-LEVEL-M-IS-TOO-FINE.EXAMPLE"} {
		l := Label{Tag: "K7QM2P3", Address: "HTTPS://" + host + "/T/K7QM2P3"}
		var pdf bytes.Buffer
		if err := Labels(&pdf, Printing{Sheet: low}, []Label{l}); err != nil {
			t.Errorf("%s: %v", host, err)
			continue
		}
		if got := decodeAt(t, renderPages(t, pdf.Bytes(), 300)[0], 300, 0, 0, 12.7); got != l.Address {
			t.Errorf("reads %q, want %q", got, l.Address)
		}
	}
}
