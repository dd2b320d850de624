package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"time"

	"go.etcd.io/bbolt"
)

// PhotoRefused is a photo that a phone sent for an entry and that was not taken. It is no record: a note beside the book, gone once
// the photo comes in good order.
type PhotoRefused struct {
	Entry string    `json:"-"`
	Name  string    `json:"-"`
	Text  string    `json:"text"`
	At    time.Time `json:"at"`
}

// refusedPhotoKey is a key in dir_setting: photo|ENTRY|NAME.
func refusedPhotoKey(entry, name string) []byte { return []byte("photo|" + entry + "|" + name) }

// notePhoto keeps why a photo was refused, or drops the note where err is nil. Only photos that an entry names get this far, so
// notes are bounded by entries.
func (s *Store) notePhoto(entry, name string, refused error) error {
	key := refusedPhotoKey(entry, name)
	var e *Error
	if refused != nil && !errors.As(refused, &e) {
		return nil // trouble of ours; the phone tries again
	}
	if refused == nil {
		noted := false
		if err := s.view(func(tx *bbolt.Tx) error { noted = tx.Bucket(bktSetting).Get(key) != nil; return nil }); err != nil || !noted {
			return err
		}
	}
	return s.do(context.Background(), 1, func(g *group) error {
		if refused == nil {
			return g.drop(bktSetting, key)
		}
		return g.putJSON(bktSetting, key, PhotoRefused{Text: e.Text, At: s.now()})
	})
}

// PhotoRefusal gives why a photo of an entry was not taken; "" where it was not refused.
func (v *View) PhotoRefusal(entry, name string) string {
	var r PhotoRefused
	if raw := v.tx.Bucket(bktSetting).Get(refusedPhotoKey(entry, name)); raw != nil && json.Unmarshal(raw, &r) == nil {
		return r.Text
	}
	return ""
}

// PhotosRefused lists the photos that were not taken, of entries the scope may see.
func (v *View) PhotosRefused() (list []PhotoRefused, err error) {
	err = v.scan(bktSetting, []byte("photo|"), func(k, raw []byte) error {
		parts := strings.Split(string(k), "|")
		if len(parts) != 3 {
			return nil
		}
		r := PhotoRefused{Entry: parts[1], Name: parts[2]}
		if err := json.Unmarshal(raw, &r); err != nil {
			return fmt.Errorf("refused photo %s: %w", r.Name, err)
		}
		if _, err := v.Entry(r.Entry); err == nil {
			list = append(list, r)
		}
		return nil
	})
	return list, err
}
