package main

import (
	"bufio"
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// asProgram makes the test binary behave as the program itself, so that tests start real processes without a build.
const asProgram = "TRIPWELL_TEST_AS_PROGRAM"

func TestMain(m *testing.M) {
	if os.Getenv(asProgram) != "" {
		main()
		return
	}
	code := m.Run()
	if demoDir != "" {
		_ = os.RemoveAll(demoDir)
	}
	os.Exit(code)
}

// process is a running server.
type process struct {
	t    testing.TB
	cmd  *exec.Cmd
	mu   sync.Mutex
	said bytes.Buffer
	ends chan error
}

// start starts the program and waits until it prints the line that ends its greeting.
func start(t testing.TB, args ...string) *process {
	t.Helper()
	p := &process{t: t, ends: make(chan error, 1)}
	p.cmd = exec.Command(os.Args[0], args...)
	p.cmd.Env = append(os.Environ(), asProgram+"=1")
	out, err := p.cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	var errs lockedBuffer
	p.cmd.Stderr = &errs
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	ready := make(chan struct{})
	go func() {
		lines := bufio.NewScanner(out)
		for lines.Scan() {
			p.mu.Lock()
			p.said.WriteString(lines.Text() + "\n")
			p.mu.Unlock()
			if strings.HasPrefix(lines.Text(), "Stop it with") {
				close(ready)
			}
		}
		p.ends <- p.cmd.Wait()
	}()
	t.Cleanup(func() { p.stop(os.Kill) })
	select {
	case <-ready:
	case err := <-p.ends:
		p.ends <- err
		t.Fatalf("tripwell %v ended: %v\n%s%s", args, err, p.output(), errs.String())
	case <-time.After(time.Minute):
		t.Fatalf("tripwell %v said nothing in a minute\n%s", args, errs.String())
	}
	return p
}

func (p *process) output() string {
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.said.String()
}

// stop sends a signal and gives how the process ended.
func (p *process) stop(with os.Signal) error {
	if p.cmd.ProcessState == nil {
		_ = p.cmd.Process.Signal(with)
	}
	select {
	case err := <-p.ends:
		p.ends <- err
		return err
	case <-time.After(30 * time.Second):
		_ = p.cmd.Process.Signal(syscall.SIGQUIT)
		p.t.Error("the server did not stop within 30 seconds")
		return nil
	}
}

// link finds what the greeting gives for a word: the address, or a role's link.
func (p *process) link(word string) string {
	p.t.Helper()
	m := regexp.MustCompile(`(?m)^\s+` + word + `\s+(http\S+)$`).FindStringSubmatch(p.output())
	if m == nil {
		p.t.Fatalf("the greeting gives no %s:\n%s", word, p.output())
	}
	return m[1]
}

// lockedBuffer is a buffer that a process writes while a test reads.
type lockedBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *lockedBuffer) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *lockedBuffer) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

// startDemo starts a demo of its own in a new folder on a free port.
func startDemo(t testing.TB) (p *process, dir string) {
	t.Helper()
	dir = filepath.Join(t.TempDir(), "demo")
	return start(t, "demo", "--data", dir, "--listen", "127.0.0.1:0"), dir
}
