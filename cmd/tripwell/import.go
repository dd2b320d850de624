package main

type importCmd struct {
	Register importRegisterCmd `cmd:"" help:"Take sites, places and devices in from a CSV or XLSX file."`
	Tray     importTrayCmd     `cmd:"" help:"Take in what a phone saved to a file because it could not send it."`
	Readings importReadingsCmd `cmd:"" help:"Take tests in that were made on paper, in a spreadsheet or with an instrument that writes a file."`
	Results  importResultsCmd  `cmd:"" help:"Take in what older lists say was done before."`
}
