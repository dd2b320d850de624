package server

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"slices"
	"strings"

	"github.com/klauspost/compress/gzip"
)

// shell is what a phone lays in of the field client. It travels as one file for each language, all parts behind one
// another: seventy small files packed one by one are a third larger, and wait for a line seventy times.
type shell struct {
	parts []part           // in the order they stand in every pack; the words of its language follow
	words map[string]part  // by language
	sums  map[string]whole // of the packs, by language
	alone []whole          // come by themselves: what the page has fetched before a worker answers, what draws codes, and last what reads them where a browser cannot
	packs map[string]asset // by name
}

// part is one file of a pack: its name and its length in bytes; whole is a file that comes by itself: its name and its
// SHA-256 in hexadecimal digits. The worker reads both as lists.
type (
	part  [2]any
	whole [2]string
)

// aloneFiles come by themselves. The last is only for a browser without a reader of codes.
var aloneFiles = []string{"boot.mjs", "field.css", "tokens.css", "icons/mark.svg", "vendor/qr-index.mjs", "vendor/qr-decode.mjs"}

func packName(lang string) string { return "field-" + lang + ".pack" }

func wholeOf(name string, plain []byte) whole {
	sum := sha256.Sum256(plain)
	return whole{name, hex.EncodeToString(sum[:])}
}

func (a *assets) part(name string) part { return part{name, len(a.files[name].plain)} }

func (a *assets) makeShell() (*shell, error) {
	names, err := a.needed("boot.mjs", "field.mjs", "field.css", "tokens.css", "icons/mark.svg")
	if err != nil {
		return nil, err
	}
	sh := &shell{words: map[string]part{}, sums: map[string]whole{}, packs: map[string]asset{}}
	for _, name := range aloneFiles {
		sh.alone = append(sh.alone, wholeOf(name, a.files[name].plain))
	}
	var body bytes.Buffer
	for _, name := range names {
		if slices.Contains(aloneFiles, name) {
			continue
		}
		sh.parts = append(sh.parts, a.part(name))
		body.Write(a.files[name].plain)
	}
	for name, file := range a.files {
		lang, ok := strings.CutPrefix(name, "words/phone-")
		if !ok {
			continue
		}
		lang = strings.TrimSuffix(lang, ".json")
		plain := slices.Concat(body.Bytes(), file.plain)
		packed, err := gzipped(plain, gzip.BestCompression)
		if err != nil {
			return nil, fmt.Errorf("shell: %w", err)
		}
		sh.words[lang], sh.sums[lang] = a.part(name), wholeOf(packName(lang), plain)
		sh.packs[packName(lang)] = asset{kind: "application/octet-stream", plain: plain, packed: packed}
	}
	return sh, nil
}
