package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"strings"

	"tripwell/export/bundle"
)

type verifyCmd struct {
	Bundle  string `arg:"" help:"The zip file."`
	Key     string `name:"key" placeholder:"KEY" help:"The organisation's public key: a file, or the key itself. Without it the key in the bundle is trusted, and named."`
	Earlier string `name:"earlier" placeholder:"HEAD" help:"A file with a signed head, or a bundle, that you took earlier: what was signed then must still stand."`
}

// Help gives an example.
func (verifyCmd) Help() string {
	return "Checks a bundle and needs no store and no network: that every record is there as it was when the head was signed, what came late, which numbers never came, and that every cell of the workbook says what the records say. Exit code 1 when anything is found.\n\nExample:\n\n    tripwell verify kiln-lane-2026.zip --key key.txt --earlier kiln-lane-2025.zip"
}

// Run checks and reports.
func (c verifyCmd) Run(e *env) error {
	f, err := os.Open(c.Bundle)
	if err != nil {
		return fmt.Errorf("cannot read %s: %w", c.Bundle, unwrapPath(err))
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return fmt.Errorf("cannot read %s: %w", c.Bundle, unwrapPath(err))
	}
	ask := bundle.Check{}
	if ask.Key, err = keyText(c.Key); err != nil {
		return err
	}
	if c.Earlier != "" {
		if ask.Earlier, err = os.ReadFile(c.Earlier); err != nil {
			return usageError{fmt.Errorf("--earlier: cannot read %s: %w", c.Earlier, unwrapPath(err))}
		}
	}
	report, err := bundle.Verify(e.ctx, f, info.Size(), ask)
	if err != nil {
		return err
	}
	return c.tell(e, report)
}

// keyText reads a key given as such or in a file.
func keyText(key string) (string, error) {
	if key == "" {
		return "", nil
	}
	b, err := os.ReadFile(key)
	switch {
	case err == nil:
		return strings.TrimSpace(string(b)), nil
	case errors.Is(err, fs.ErrNotExist) && strings.HasPrefix(key, "tripwell/") && strings.Count(key, "+") >= 2:
		return key, nil
	}
	return "", usageError{fmt.Errorf("--key: %q is neither a file that can be read nor a key", key)}
}

func (c verifyCmd) tell(e *env, r bundle.Report) error {
	for _, t := range r.Checked {
		fmt.Fprintln(e.stdout, "Checked:", t+".")
	}
	for _, t := range r.Notes {
		fmt.Fprintln(e.stdout, "Note:", t)
	}
	for _, f := range r.Findings {
		fmt.Fprintf(e.stdout, "Found: %s: %s\n", f.Where, f.Text)
	}
	if n := len(r.Findings) + r.More; n > 0 {
		if r.More > 0 {
			fmt.Fprintf(e.stdout, "Found: and %d more.\n", r.More)
		}
		return fmt.Errorf("%s does not prove itself: %d findings", c.Bundle, n)
	}
	_, err := fmt.Fprintln(e.stdout, "Nothing is wrong: the records are those the head was signed over, and the workbook says what they say.\nThis shows that nothing was changed since; it does not show that what was written down was true.")
	return err
}
