package store

import (
	"context"
	"crypto/rand"
	"encoding/binary"
	"encoding/json"
	"fmt"

	"tripwell/store/record"
)

// mintMost bounds one call: the list of tags is one record.
const mintMost = 5_000

// MintTags draws n new tags nobody holds and appends tags.minted.
func (s *Store) MintTags(ctx context.Context, by string, n int) ([]string, error) {
	if n < 1 || n > mintMost {
		return nil, &Error{Code: "invalid", Field: "n", Text: fmt.Sprintf("Between 1 and %d tags can be made at a time.", mintMost)}
	}
	var tags []string
	err := s.do(ctx, 1, func(g *group) (err error) {
		if tags, err = g.drawTags(n); err != nil {
			return err
		}
		if _, err := g.appendDrafts([]Draft{{Kind: "tags.minted", Log: record.Org, By: by, Body: mustJSON(map[string]any{"tags": tags})}}); err != nil {
			return err
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	return tags, nil
}

// drawTags draws tags that were never minted or bound here.
func (g *group) drawTags(n int) ([]string, error) {
	tags, drawn := make([]string, 0, n), map[string]bool{}
	for len(tags) < n {
		var b [4]byte
		_, _ = rand.Read(b[:]) // never fails (crypto/rand)
		tag, ok := record.DrawTag(binary.BigEndian.Uint32(b[:]))
		if !ok || drawn[tag] || g.tagTaken(tag) {
			continue
		}
		drawn[tag] = true
		tags = append(tags, tag)
	}
	return tags, nil
}

func (g *group) tagTaken(tag string) bool {
	return g.tx.Bucket(bktTaken).Get([]byte(tag)) != nil
}

// noteTags keeps which tags were ever minted or bound.
func (g *group) noteTags(r *record.Record) error {
	var body struct {
		Tag  string   `json:"tag"`
		Tags []string `json:"tags"`
	}
	if r.Kind != "tags.minted" && r.Kind != "tag.bound" {
		return nil
	}
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return fmt.Errorf("tags in %s: %w", r.ID, err)
	}
	for _, tag := range append(body.Tags, body.Tag) {
		if tag == "" {
			continue
		}
		if err := g.tx.Bucket(bktTaken).Put([]byte(tag), []byte{}); err != nil {
			return fmt.Errorf("note tag %s: %w", tag, err)
		}
	}
	return nil
}
