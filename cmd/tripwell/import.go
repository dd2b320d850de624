package main

type importCmd struct {
	Register importRegisterCmd `cmd:"" help:"Take sites, places and devices in from a CSV or XLSX file."`
}
