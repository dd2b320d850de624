package server

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"io/fs"
	"net/http"
	"path"
	"strings"
	"sync"

	"github.com/klauspost/compress/gzip"
	"github.com/labstack/echo/v4"

	"tripwell/static"
)

// assets are the files a browser may fetch, under /assets/HASH/NAME with one hash over all of them. The whole tree moves
// when one file does, so ES modules import each other by relative names and always get the files they were written with,
// and every answer can be cached for ever. An address with another hash is not found: to give today's file for yesterday's
// address would put the wrong bytes into a cache that never asks again.
type assets struct {
	hash  string
	files map[string]asset
	shell func() (*shell, error) // made when first asked for
}

type asset struct {
	kind          string
	plain, packed []byte // packed is nil where gzip does not pay
}

var assetKinds = map[string]string{
	".css": "text/css; charset=utf-8", ".mjs": "text/javascript; charset=utf-8", ".js": "text/javascript; charset=utf-8",
	".json": "application/json", ".svg": "image/svg+xml", ".png": "image/png", ".txt": "text/plain; charset=utf-8",
	".webmanifest": "application/manifest+json", ".woff2": "font/woff2", ".wasm": "application/wasm",
}

func readAssets(tree fs.FS) (*assets, error) {
	a := &assets{files: map[string]asset{}}
	a.shell = sync.OnceValues(a.makeShell)
	sum := sha256.New()
	err := fs.WalkDir(tree, ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		raw, err := fs.ReadFile(tree, name)
		if err != nil {
			return err
		}
		if ext := path.Ext(name); (ext == ".mjs" || ext == ".css") && !strings.HasPrefix(name, "vendor/") { // others' files keep their licences
			raw = withoutComments(raw)
		}
		return a.add(sum, name, raw)
	})
	if err != nil {
		return nil, err
	}
	for _, lang := range static.Languages {
		if _, ok := a.files["words/"+lang+".json"]; !ok {
			continue
		}
		raw, err := static.PhoneWords(tree, lang)
		if err != nil {
			return nil, err
		}
		if err := a.add(sum, static.PhoneWordsName(lang), raw); err != nil {
			return nil, err
		}
	}
	a.hash = hex.EncodeToString(sum.Sum(nil))[:16]
	return a, nil
}

func (a *assets) add(sum io.Writer, name string, raw []byte) error {
	kind, known := assetKinds[path.Ext(name)]
	if !known {
		return fmt.Errorf("assets: %s has a file type nobody named", name)
	}
	fmt.Fprintf(sum, "%s %d\n", name, len(raw))
	_, _ = sum.Write(raw)
	packed, err := gzipped(raw, gzip.BestCompression)
	if err != nil {
		return fmt.Errorf("assets: %s: %w", name, err)
	}
	if len(packed) > len(raw)*9/10 {
		packed = nil
	}
	a.files[name] = asset{kind: kind, plain: raw, packed: packed}
	return nil
}

// root is the folder of all assets, for the field client: /assets/HASH/.
func (a *assets) root() string { return "/assets/" + a.hash + "/" }

// path gives the address of one asset; a name that is not embedded is a fault of the page that asks.
func (a *assets) path(name string) (string, error) {
	if _, ok := a.files[name]; !ok {
		return "", fmt.Errorf("asset %s is not embedded", name)
	}
	return a.root() + name, nil
}

// assetShow answers /assets/HASH/NAME.
func (s *Server) assetShow(c echo.Context) error {
	hash, name, _ := strings.Cut(c.Param("*"), "/")
	file, ok := s.assets.files[name]
	if !ok && path.Ext(name) == ".pack" {
		sh, err := s.assets.shell()
		if err != nil {
			return err
		}
		file, ok = sh.packs[name]
	}
	if !ok || hash != s.assets.hash {
		return refuse(codeNotFound, "", "This file is of another version of the program. Load the page again.")
	}
	h := c.Response().Header()
	h.Set("Cache-Control", "public, max-age=31536000, immutable")
	h.Set("Vary", "Accept-Encoding")
	body := file.plain
	if file.packed != nil && strings.Contains(c.Request().Header.Get("Accept-Encoding"), "gzip") {
		h.Set("Content-Encoding", "gzip")
		body = file.packed
	}
	return c.Blob(http.StatusOK, file.kind, body)
}
