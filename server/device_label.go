package server

import (
	"strconv"
	"strings"

	"tripwell/export"
	"tripwell/store"
	"tripwell/store/record"
)

// label is the code of a device's label, drawn here so that it can be looked at before it is printed.
type label struct {
	Size                       int
	Path, Address, Aria, Sheet string
	PNG, SVG                   string
}

func (s *Server) labelOf(d store.Device, view *devicePage) {
	base := s.store.URL()
	switch {
	case d.Tag == "":
		view.NoLabel = s.words.Say("office.device.no_tag")
		return
	case base == "":
		view.NoLabel = s.words.Say("office.device.no_url")
		return
	}
	address := record.TagAddress(base, d.Tag)
	dark, err := export.CodeBitmap(address)
	if err != nil {
		view.NoLabel = err.Error()
		return
	}
	path, size := svgPath(dark)
	view.Label = &label{Size: size, Path: path, Address: address, Aria: s.words.Say("office.device.qr", "address", address), Sheet: "/labels.pdf?sheet=letter-3x10&site=" + d.Site + "&device=" + d.ID,
		PNG: "/label?as=png&tag=" + d.Tag, SVG: "/label?as=svg&tag=" + d.Tag}
}

// svgPath draws the dark modules of a square bitmap as rows of rectangles, inside a quiet zone of four modules that
// readers need (ISO/IEC 18004).
func svgPath(dark [][]bool) (path string, size int) {
	const quiet = 4
	var b strings.Builder
	for y, row := range dark {
		for x := 0; x < len(row); x++ {
			if !row[x] {
				continue
			}
			run := x
			for run < len(row) && row[run] {
				run++
			}
			b.WriteString("M" + strconv.Itoa(x+quiet) + " " + strconv.Itoa(y+quiet) + "h" + strconv.Itoa(run-x) + "v1h-" + strconv.Itoa(run-x) + "z")
			x = run
		}
	}
	return b.String(), len(dark) + 2*quiet
}
