package export

var explainedColumns = []column{{"sheet", 18, textCell}, {"column", 30, textCell}, {"meaning", 110, textCell}}

// explained says what the columns hold whose heading does not say it all.
func (b *book) explained() error {
	s, err := b.sheet("explained", explainedColumns)
	if err != nil {
		return err
	}
	for _, key := range sheetOrder {
		for _, c := range sheetColumns[key] {
			if about := "sheet.about." + c.key; b.words.Has(about) {
				if err := s.row().text(b.say("sheet.name." + key)).text(b.say("sheet.col." + c.key)).text(b.say(about)).end(); err != nil {
					return err
				}
			}
		}
	}
	return s.close()
}

// sheetColumns are the columns of the sheets by key.
var sheetColumns = map[string][]column{
	"register": registerColumns, "entries": entryColumns, "readings": readingColumns, "flags": flagColumns, "due": dueColumns, "limits": limitColumns, "corrections": correctionColumns,
	"imported": importedColumns, "defects": defectColumns, "instruments": instrumentColumns, "plans": planColumns, "compliance": complianceColumns, "gaps": gapColumns, "people": peopleColumns,
	"refused": refusedColumns, "sample": sampleColumns,
}
