package bundle

import (
	"maps"
	"slices"
	"strings"
)

// namedFiles holds photos and certificates against the records that name them: each is what its name says, none was left out, none
// put in.
func (v *verifier) namedFiles() error {
	named, left := map[string]string{}, map[string]bool{} // FOLDER/SHA256 → record
	for _, f := range v.logs {
		for _, n := range f.files {
			named[folderOf(n)+n.Name] = n.Record
		}
	}
	for _, name := range v.doc.NoPhotos {
		left["photos/"+name] = true
	}
	for _, name := range v.doc.NoFiles {
		left["certificates/"+name] = true
	}
	there := map[string]bool{}
	photos, certificates := 0, 0
	for name := range v.files {
		switch {
		case strings.HasPrefix(name, "photos/"):
			photos++
		case strings.HasPrefix(name, "certificates/"):
			certificates++
		default:
			continue
		}
		plain, _, _ := strings.Cut(name, ".")
		there[plain] = true
		if named[plain] == "" {
			v.report.find(name, "No record of the bundle names this file.")
		} else if sum, err := v.sum(name); err != nil || !strings.HasSuffix(plain, "/"+sum) {
			v.report.find(name, "This file is not the one that its record names: its SHA-256 is another.")
		}
	}
	for _, name := range slices.Sorted(maps.Keys(named)) {
		if !there[name] && !left[name] {
			folder, sum, _ := strings.Cut(name, "/")
			v.report.find(folder, "The record %s names a %s (SHA-256 %s) that is not in the bundle, and the bundle does not say that it never arrived.", named[name], strings.TrimSuffix(folder, "s"), short(sum))
		}
	}
	if photos > 0 {
		v.report.checked("%d photos against the records that name them", photos)
	}
	if certificates > 0 {
		v.report.checked("%d certificates against the records that name them", certificates)
	}
	if n := len(v.doc.NoPhotos); n > 0 {
		v.report.note("%d photos that records name had not arrived when the bundle was made, it says; ask for them.", n)
	}
	if n := len(v.doc.NoFiles); n > 0 {
		v.report.note("%d certificates that records name were not on the server when the bundle was made, it says; ask for them.", n)
	}
	return nil
}
