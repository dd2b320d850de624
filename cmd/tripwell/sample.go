package main

import (
	"fmt"
	"io"
	"os"

	"tripwell/export/bundle"
	"tripwell/export/paper"
	"tripwell/forms"
)

type sampleCmd struct {
	outFile
	Bundle     string  `arg:"" help:"The zip file."`
	Word       string  `name:"word" required:"" placeholder:"WORD" help:"Any word, chosen after the bundle was handed over."`
	Site       string  `name:"site" placeholder:"CODE" help:"Only this site; all sites of the bundle when left out."`
	Confidence float64 `name:"confidence" default:"95" help:"Confidence in percent (${default})."`
	Share      float64 `name:"share" default:"5" help:"Share of wrong ones that must not be missed, in percent (${default})."`
	Key        string  `name:"key" placeholder:"KEY" help:"The organisation's public key, as for verify."`
	Paper      string  `name:"paper" default:"letter" help:"letter or a4 (${default})."`
	Wrong      int     `name:"wrong" default:"-1" help:"How many of the devices were found wrong: prints what that says of all of them."`
}

// Help gives an example.
func (sampleCmd) Help() string {
	return "Draws devices to find on site and rooms to count against the register, and writes a sheet to print. The draw is fixed by the bundle's head, signed before, and your word, chosen after: neither side chose the sample, and anybody with the bundle draws the same.\n\nExample:\n\n    tripwell sample kiln-lane-2026.zip --word thunderstorm --site KILN-LANE -o sample.pdf\n\nBack from the site, what was found says how many of all may be wrong:\n\n    tripwell sample kiln-lane-2026.zip --word thunderstorm --site KILN-LANE -o sample.pdf --wrong 2"
}

// Run draws and writes the sheet.
func (c sampleCmd) Run(e *env) error {
	size, err := paper.SizeNamed(c.Paper)
	if err != nil {
		return usageError{fmt.Errorf("--paper: %w", err)}
	}
	ask := paper.SampleAsk{Site: c.Site, Word: c.Word, Confidence: c.Confidence / 100, Share: c.Share / 100, Head: "of the bundle"}
	if err := ask.Check(); err != nil {
		return usageError{err}
	}
	key, err := keyText(c.Key)
	if err != nil {
		return err
	}
	f, err := os.Open(c.Bundle)
	if err != nil {
		return fmt.Errorf("cannot read %s: %w", c.Bundle, unwrapPath(err))
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return fmt.Errorf("cannot read %s: %w", c.Bundle, unwrapPath(err))
	}
	s, err := bundle.Draw(e.ctx, f, info.Size(), key, ask)
	if err != nil {
		return err
	}
	if c.Wrong > len(s.Devices) {
		return usageError{fmt.Errorf("--wrong: %d of %d devices cannot be wrong", c.Wrong, len(s.Devices))}
	}
	if err := c.write(e, func(w io.Writer) error { return paper.PrintSample(w, s, size) }); err != nil {
		return err
	}
	told := e.stderr // the sheet itself may go to standard output
	fmt.Fprintf(told, "%d of %d devices and %d of %d rooms were drawn.\n", len(s.Devices), s.Lot, len(s.Rooms), s.RoomLot)
	if c.Wrong >= 0 {
		least, most := forms.LotBounds(s.Lot, c.Wrong, len(s.Devices), ask.Confidence)
		fmt.Fprintf(told, "%d of %d were wrong: of all %d, from %d to %d are, at %g %% confidence.\n", c.Wrong, len(s.Devices), s.Lot, least, most, c.Confidence)
	}
	return nil
}
