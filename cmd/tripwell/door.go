package main

import (
	"context"
	"errors"
	"io"
	"log/slog"
	"net/http"
	"net/url"
	"time"

	"tripwell/server"
	"tripwell/store"
)

// door is a command's way to a store: through the server that runs on its folder, or on the store opened for the command.
type door struct {
	*server.Door
	ctx context.Context
}

// openDoor opens the folder's owner's door. The folder must hold a store.
func (e *env) openDoor(dir string) (*door, error) {
	d, err := server.OpenDoor(e.ctx, dir, func() (*store.Store, error) {
		return store.Open(dir, store.Options{Now: time.Now, Log: logTo(e, slog.LevelInfo)})
	})
	if err != nil {
		return nil, err
	}
	return &door{d, e.ctx}, nil
}

// with runs a command's work through the folder's door and closes it.
func (e *env) with(dir string, work func(*door) error) error {
	d, err := e.openDoor(dir)
	if err != nil {
		return err
	}
	return errors.Join(work(d), d.Close())
}

// get asks for something; the caller closes it.
func (d *door) get(path string, query url.Values) (io.ReadCloser, error) {
	body, err := d.Ask(d.ctx, http.MethodGet, path, query, nil)
	return body, wrongFlag(err)
}

// flagFields are the fields of a refusal that a flag of the command line gave.
var flagFields = map[string]bool{
	"site": true, "on": true, "from": true, "to": true, "sheet": true, "start": true, "by": true, "person": true, "id": true,
	"in_force": true, "zone": true, "dates": true, "map": true, "roll": true, "nudge": true, "lines": true, "marking": true, "count": true,
	"n": true, "tag": true, "read_by": true, "typed_by": true, "year": true, "task": true, "until": true, "paper": true,
}

// wrongFlag makes a refusal of what a flag says wrong use: unknown site, sheet or person.
func wrongFlag(err error) error {
	var refused *store.Error
	if errors.As(err, &refused) && flagFields[refused.Field] && (refused.Code == "not_found" || refused.Code == "invalid") {
		return usageError{err}
	}
	return err
}

// setIf adds a value to a query where there is one.
func setIf(q url.Values, name, value string) {
	if value != "" {
		q.Set(name, value)
	}
}
