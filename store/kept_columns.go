package store

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"go.etcd.io/bbolt"
)

// KeptColumns is how somebody read a file of one shape, kept under a name for the next one. It is a help and no fact:
// it stands outside book and trees, is replaced under its name and really deleted.
type KeptColumns struct {
	Of     string          `json:"of"` // what is read: register or results
	Name   string          `json:"name"`
	Shapes []string        `json:"shapes"` // of the rows of headings it was made for (intake.Shape)
	Said   json.RawMessage `json:"said"`   // as the package that reads such files writes it
	By     string          `json:"by"`     // person id
	At     time.Time       `json:"at"`
}

// Bounds of kept columns: names a page can list, and what a form of a large file may say.
const (
	keptColumnsMost  = 200
	keptColumnsName  = 60 // characters
	keptColumnsBytes = 256 << 10
)

func keptColumnsKey(of, name string) []byte { return []byte(of + "\x00" + strings.ToLower(name)) }

// KeepColumns keeps columns under their name, in place of what was kept under it before.
func (s *Store) KeepColumns(ctx context.Context, k KeptColumns) error {
	k.Name = strings.Join(strings.Fields(k.Name), " ")
	switch {
	case k.Name == "":
		return &Error{Code: "invalid", Field: "name", Text: "The columns need a name to be found again, such as the name of who sends these files."}
	case !utf8.ValidString(k.Name) || utf8.RuneCountInString(k.Name) > keptColumnsName:
		return &Error{Code: "invalid", Field: "name", Text: fmt.Sprintf("The name is longer than %d characters. Write a shorter one.", keptColumnsName)}
	case len(k.Said) > keptColumnsBytes:
		return &Error{Code: "too_large", Field: "name", Text: "There is more to say of these columns than can be kept here. Save it as a file instead."}
	}
	k.At = s.now().UTC().Truncate(time.Second)
	return s.do(ctx, 1, func(g *group) error {
		bucket, key := g.tx.Bucket(bktColumns), keptColumnsKey(k.Of, k.Name)
		if bucket.Get(key) == nil && bucket.Stats().KeyN >= keptColumnsMost {
			return &Error{Code: "conflict", Field: "name", Text: fmt.Sprintf("%d files' columns are kept already. Delete one that is no longer needed first.", keptColumnsMost)}
		}
		return g.putJSON(bktColumns, key, k)
	})
}

// KeptColumns lists the columns kept for files of one kind, by name.
func (s *Store) KeptColumns(of string) (list []KeptColumns, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		c := tx.Bucket(bktColumns).Cursor()
		prefix := keptColumnsKey(of, "")
		for key, v := c.Seek(prefix); key != nil && strings.HasPrefix(string(key), string(prefix)); key, v = c.Next() {
			var k KeptColumns
			if err := json.Unmarshal(v, &k); err != nil {
				return fmt.Errorf("read kept columns %q: %w", key, err)
			}
			list = append(list, k)
		}
		return nil
	})
	return list, err
}

// DropColumns deletes what is kept under a name; nothing kept is no error.
func (s *Store) DropColumns(ctx context.Context, of, name string) error {
	return s.do(ctx, 1, func(g *group) error { return g.drop(bktColumns, keptColumnsKey(of, name)) })
}

// Fits tells whether one of a file's rows has the headings these columns were made for.
func (k KeptColumns) Fits(shapes map[string]bool) bool {
	return slices.ContainsFunc(k.Shapes, func(s string) bool { return shapes[s] })
}
