package server

import (
	"bytes"
	"crypto/sha256"
	_ "embed"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"net/http"
	"path"
	"regexp"
	"slices"

	"github.com/labstack/echo/v4"
)

// workerText is the service worker without its first line, which names this build.
//
//go:embed sw.js
var workerText string

const shellPath = "/field"

// workerBuild is what the worker is told of the build it belongs to.
type workerBuild struct {
	Cache string           `json:"cache"`
	Shell string           `json:"shell"`
	Root  string           `json:"root"`
	Files []part           `json:"files"`
	Words map[string]part  `json:"words"`
	Packs map[string]whole `json:"packs"`
	Alone []whole          `json:"alone"`
}

// worker writes the script of /sw.js. Its bytes change when any file of the field client, its page or the worker itself
// changes, and only then: a browser installs a worker anew when its bytes differ.
func (s *Server) worker(page []byte) (string, error) {
	sh, err := s.assets.shell()
	if err != nil {
		return "", err
	}
	build := workerBuild{Shell: shellPath, Root: s.assets.root(), Files: sh.parts, Words: sh.words, Packs: sh.sums, Alone: sh.alone}
	sum := sha256.New()
	fmt.Fprintf(sum, "%s\n%s\n%s\n", s.assets.hash, workerText, page)
	build.Cache = "tripwell-field-" + hex.EncodeToString(sum.Sum(nil))[:16]
	line, err := json.Marshal(build)
	if err != nil {
		return "", err
	}
	return "const BUILD = " + string(line) + ";\n" + string(withoutComments([]byte(workerText))), nil
}

// workerShow answers /sw.js. It lies at the root because a worker may only answer what lies below it, and labels do.
func (s *Server) workerShow(c echo.Context) error {
	var page bytes.Buffer
	if err := s.pages["field.html"].Execute(&page, s.shellFrame()); err != nil {
		return fmt.Errorf("worker: %w", err)
	}
	script, err := s.worker(page.Bytes())
	if err != nil {
		return err
	}
	c.Response().Header().Set("Cache-Control", "no-cache")
	return sendPacked(c, http.StatusOK, "text/javascript; charset=utf-8", []byte(script))
}

var (
	moduleAsks   = regexp.MustCompile(`(?:from|import|new URL)\s*\(?\s*["'](\.{1,2}/[^"']+)["']`)
	styleAsks    = regexp.MustCompile(`(?:url\(|@import)\s*["']?(\.{1,2}/[^"')]+)`)
	manifestAsks = regexp.MustCompile(`"src":\s*"(\.{1,2}/[^"]+)"`)
)

// needed lists the files that some files ask for, and those in turn, by name: what must be laid in for the client to run.
func (a *assets) needed(names ...string) ([]string, error) {
	found := map[string]bool{}
	for len(names) > 0 {
		name := names[0]
		names = names[1:]
		file, ok := a.files[name]
		if !ok {
			return nil, fmt.Errorf("worker: %s is asked for and not embedded", name)
		}
		if found[name] {
			continue
		}
		found[name] = true
		asks := map[string]*regexp.Regexp{".mjs": moduleAsks, ".css": styleAsks, ".webmanifest": manifestAsks}[path.Ext(name)]
		if asks == nil {
			continue
		}
		for _, m := range asks.FindAllStringSubmatch(string(file.plain), -1) {
			names = append(names, path.Join(path.Dir(name), m[1]))
		}
	}
	list := make([]string, 0, len(found))
	for name := range found {
		list = append(list, name)
	}
	slices.Sort(list)
	return list, nil
}
