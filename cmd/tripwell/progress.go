package main

import (
	"io"
	"os"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// progress shows on a terminal on standard error how far something long is; everywhere else it shows nothing.
type progress struct {
	to   *os.File // nil: no terminal
	what string
	bar  *progressbar.ProgressBar // made when the total is known
}

// progress begins one; end it with finish.
func (e *env) progress(what string) *progress {
	f, ok := e.stderr.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return &progress{what: what}
	}
	return &progress{to: f, what: what}
}

// set says how much is done of how much; total -1 is unknown.
func (p *progress) set(done, total int64) {
	if p.to == nil {
		return
	}
	if p.bar == nil || p.bar.GetMax64() != total && total > 0 {
		p.bar = p.draw(total)
	}
	_ = p.bar.Set64(done) // a bar that cannot be drawn is no reason to stop the work
}

// draw makes the bar. Its spinner turns when it is told of progress: the library's own timer would race with that.
func (p *progress) draw(total int64) *progressbar.ProgressBar {
	return progressbar.NewOptions64(total,
		progressbar.OptionSetWriter(p.to),
		progressbar.OptionSetDescription(p.what),
		progressbar.OptionSetWidth(24),
		progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionSetSpinnerChangeInterval(0),
		progressbar.OptionShowBytes(total < 0),
		progressbar.OptionShowCount(),
		progressbar.OptionClearOnFinish(),
	)
}

// finish takes the bar off the terminal.
func (p *progress) finish() {
	if p.bar != nil {
		_ = p.bar.Finish()
	}
}

// counting passes bytes on and shows how many have come.
type counting struct {
	to   io.Writer
	bar  *progress
	done int64
}

func (c *counting) Write(b []byte) (int, error) {
	n, err := c.to.Write(b)
	c.done += int64(n)
	c.bar.set(c.done, -1)
	return n, err
}
