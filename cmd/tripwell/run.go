package main

import (
	"context"
	"errors"
	"fmt"
	"io"

	"github.com/alecthomas/kong"
)

// cli is every command with its flags; one file per command holds its Run.
type cli struct {
	Demo     demoCmd     `cmd:"" help:"Serve an invented organisation on this machine, to try things out."`
	Serve    serveCmd    `cmd:"" help:"Serve a store."`
	Import   importCmd   `cmd:"" help:"Take in what exists elsewhere."`
	Due      dueCmd      `cmd:"" help:"List what is due or overdue."`
	Workbook workbookCmd `cmd:"" help:"Write the workbook an auditor gets."`
	Bundle   bundleCmd   `cmd:"" help:"Write what an auditor takes away, with its proof."`
	Verify   verifyCmd   `cmd:"" help:"Check a bundle; needs no store."`
	Sample   sampleCmd   `cmd:"" help:"Draw a fair sample from a bundle, to check on site; needs no store."`
	Labels   labelsCmd   `cmd:"" help:"Write sheets of labels."`
	Label    labelCmd    `cmd:"" help:"Write one label as a picture."`
	Backup   backupCmd   `cmd:"" help:"Write a checked copy of the book to a file."`
	Restore  restoreCmd  `cmd:"" help:"Put a backup in the place of the book."`
	Check    checkCmd    `cmd:"" help:"Read the whole store and say whether anything is wrong."`
	Seal     sealCmd     `cmd:"" help:"Drop the bytes of one record for good; its hash stays."`
	Rebuild  rebuildCmd  `cmd:"" help:"Compute all lists anew from the records."`
	Verdict  verdictCmd  `cmd:"" help:"Judge tests given as JSON lines."`
	Forms    formsCmd    `cmd:"" help:"List device kinds, forms, readings and limits; export and import forms."`
	Limits   limitsCmd   `cmd:"" help:"Export and import limit sets."`
	Version  versionCmd  `cmd:"" help:"Print the program's version."`

	RoundSheet  roundSheetCmd  `cmd:"" name:"round-sheet" help:"Write a round for paper, as PDF or worksheet."`
	Statement   statementCmd   `cmd:"" help:"Write what was due at a site and what became of it, on two pages as PDF."`
	DeviceSheet deviceSheetCmd `cmd:"" name:"device-sheet" help:"Write what is filed of one device, as PDF."`
	Table       tableCmd       `cmd:"" help:"Write one sheet of the workbook as CSV or JSON Lines."`
}

// env is what a command may touch beside its flags.
type env struct {
	ctx            context.Context
	stdin          io.Reader
	stdout, stderr io.Writer
}

// usageError is wrong use of a command: exit code 2.
type usageError struct{ err error }

func (e usageError) Error() string { return e.err.Error() }
func (e usageError) Unwrap() error { return e.err }

// exitCode gives 0 done, 1 failed, 2 wrong use.
func exitCode(err error) int {
	var u usageError
	switch {
	case err == nil:
		return 0
	case errors.As(err, &u):
		return 2
	}
	return 1
}

// run parses args and runs the command they name.
func run(ctx context.Context, args []string, stdin io.Reader, stdout, stderr io.Writer) error {
	var c cli
	exited := false
	p, err := kong.New(&c,
		kong.Name("tripwell"),
		kong.Description("Records of ground-fault and receptacle testing that work where there is no signal."),
		kong.Writers(stdout, stderr),
		kong.Exit(func(int) { exited = true }),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true}),
	)
	if err != nil {
		return fmt.Errorf("commands: %w", err)
	}
	if len(args) == 0 {
		args = []string{"--help"}
	}
	k, err := p.Parse(args)
	if exited {
		return nil
	}
	if err != nil {
		return usageError{fmt.Errorf("%w (see tripwell --help)", err)}
	}
	return k.Run(&env{ctx: ctx, stdin: stdin, stdout: stdout, stderr: stderr})
}
