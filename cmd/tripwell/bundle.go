package main

type bundleCmd struct{ forAuditor }

// Help gives an example.
func (bundleCmd) Help() string {
	return "Writes what an auditor takes away: the workbook, every record of the sites it is about, and the proof that nothing was changed or left out. The period chooses the rows of the workbook; the records are always whole. That it was taken is itself recorded.\n\nExample:\n\n    tripwell bundle -o kiln-lane-2026.zip --data /srv/tripwell --site KILN-LANE --from 2026-01-01 --to 2026-12-31"
}

// Run writes the bundle to the file.
func (c bundleCmd) Run(e *env) error { return c.take(e, "/own/bundle", "bundle") }
