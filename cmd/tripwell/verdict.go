package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"

	"tripwell/forms"
)

// maxLine is the longest line verdict judges, in bytes.
const maxLine = 64 << 10

type verdictCmd struct{}

// Help is shown by --help.
func (verdictCmd) Help() string {
	return `Reads one test a line as JSON, writes one verdict a line as JSON, and needs no store. A line that cannot be judged gives
{"error":{"code","field","text"},"line":N}, and the next is still judged; the command then exits with 1. Blank lines are skipped.

Example:

  echo '{"form":"gfci-receptacle/button","readings":{"condition":"sound","found":"on","button_trips":true,"button_resets":true}}' | tripwell verdict

Only form and readings are required; limit_set defaults to the shipped one of the kind. "tripwell forms" lists forms, readings
and limits.`
}

// badLine is what verdict writes for a line that cannot be judged.
type badLine struct {
	Error struct {
		Code  string `json:"code"`
		Field string `json:"field"`
		Text  string `json:"text"`
	} `json:"error"`
	Line int `json:"line"`
}

// Run judges every line of stdin.
func (verdictCmd) Run(e *env) error {
	done := make(chan error, 1)
	go func() { done <- judgeAll(e.stdin, e.stdout) }()
	select {
	case err := <-done:
		return err
	case <-e.ctx.Done():
		// The read of a terminal cannot be called off; the program ends, and it with it.
		return fmt.Errorf("verdict: %w", e.ctx.Err())
	}
}

func judgeAll(stdin io.Reader, stdout io.Writer) error {
	in := bufio.NewReaderSize(stdin, maxLine+2)
	out := bufio.NewWriterSize(stdout, 64<<10)
	lines, bad, err := judgeLines(in, out)
	if flushErr := out.Flush(); err == nil {
		err = flushErr
	}
	if err == nil && bad > 0 {
		err = fmt.Errorf("%d of %d lines could not be judged; their errors stand in the output", bad, lines)
	}
	return err
}

// judgeLines writes a verdict or an error for every line that is not blank. It flushes whenever no input waits, so that
// a program at the other end gets its answer at once.
func judgeLines(in *bufio.Reader, out *bufio.Writer) (lines, bad int, err error) {
	var buf []byte
	for number := 1; ; number++ {
		raw, tooLong, readErr := readLine(in)
		if readErr != nil && readErr != io.EOF {
			return lines, bad, fmt.Errorf("read line %d: %w", number, readErr)
		}
		raw = bytes.TrimSpace(raw)
		if len(raw) > 0 {
			lines++
			var ok bool
			if buf, ok = judgeLine(buf[:0], raw, tooLong, number); !ok {
				bad++
			}
			if _, err := out.Write(buf); err != nil {
				return lines, bad, err
			}
			if in.Buffered() == 0 {
				if err := out.Flush(); err != nil {
					return lines, bad, err
				}
			}
		}
		if readErr == io.EOF {
			return lines, bad, nil
		}
	}
}

// readLine gives the next line; of a line that is too long it gives the beginning and skips the rest.
func readLine(in *bufio.Reader) (line []byte, tooLong bool, err error) {
	line, err = in.ReadSlice('\n')
	if !errors.Is(err, bufio.ErrBufferFull) {
		return line, len(bytes.TrimRight(line, "\r\n")) > maxLine, err
	}
	line = bytes.Clone(line[:1])
	for errors.Is(err, bufio.ErrBufferFull) {
		_, err = in.ReadSlice('\n')
	}
	return append(line, '.'), true, err
}

// judgeLine appends the answer to one line, with its newline.
func judgeLine(dst, raw []byte, tooLong bool, number int) (answer []byte, ok bool) {
	var verdict forms.Verdict
	err := error(&forms.Error{Code: "too_large", Text: fmt.Sprintf("A line may have %d bytes at most. Split the test into several lines.", maxLine)})
	if !tooLong {
		var line forms.Line
		if err = forms.DecodeLine(raw, &line); err == nil {
			verdict, err = forms.Shipped().JudgeLine(&line)
		}
	}
	if err == nil {
		return append(verdict.AppendJSON(dst), '\n'), true
	}
	answer, err = appendBadLine(dst, err, number)
	if err != nil {
		return append(dst, '\n'), false
	}
	return answer, false
}

func appendBadLine(dst []byte, err error, number int) ([]byte, error) {
	b := badLine{Line: number}
	b.Error.Code, b.Error.Text = "invalid", err.Error()
	var refused *forms.Error
	if errors.As(err, &refused) {
		b.Error.Code, b.Error.Field, b.Error.Text = refused.Code, refused.Field, refused.Text
	}
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(b); err != nil {
		return dst, err
	}
	return append(dst, buf.Bytes()...), nil
}
