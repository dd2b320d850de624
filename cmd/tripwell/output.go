package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
)

// outFile is the flag of commands that make a file.
type outFile struct {
	Output string `name:"output" short:"o" required:"" placeholder:"FILE" help:"File to write; - writes to standard output."`
}

// write makes the file beside its final place and moves it there when all of it is written, so a half-written file never
// has the final name. What was there before is replaced.
func (o outFile) write(e *env, fill func(io.Writer) error) error {
	if o.Output == "-" {
		return fill(e.stdout)
	}
	f, err := os.CreateTemp(filepath.Dir(o.Output), ".tripwell-*")
	if err != nil {
		return fmt.Errorf("cannot write %s: %w", o.Output, unwrapPath(err))
	}
	if err := fill(f); err != nil {
		_ = f.Close()
		_ = os.Remove(f.Name())
		return err
	}
	err = f.Sync()
	if closed := f.Close(); err == nil {
		err = closed
	}
	if err == nil {
		err = os.Rename(f.Name(), o.Output)
	}
	if err != nil {
		_ = os.Remove(f.Name())
		return fmt.Errorf("cannot write %s: %w", o.Output, unwrapPath(err))
	}
	return nil
}

// unwrapPath leaves out the temporary name that means nothing to the reader.
func unwrapPath(err error) error {
	var p *os.PathError
	var l *os.LinkError
	switch {
	case errors.As(err, &p):
		return p.Err
	case errors.As(err, &l):
		return l.Err
	}
	return err
}

// copyOut copies what the store sends into the file and shows how much has come.
func copyOut(e *env, w io.Writer, from io.Reader, what string) error {
	bar := e.progress(what)
	defer bar.finish()
	if _, err := io.Copy(&counting{to: w, bar: bar}, from); err != nil {
		return fmt.Errorf("%s broke off: %w", what, err)
	}
	return nil
}
