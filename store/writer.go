package store

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"time"

	"go.etcd.io/bbolt"
)

const (
	queueLength = 128   // jobs waiting; a full queue answers busy
	groupLimit  = 2_000 // records of a group; the last job may go over it
	gatherWait  = 2 * time.Millisecond
)

// job is one call that changes the store. run decides it inside the group's transaction and may run more than once: it
// must set, not add to, what it answers. An error of run concerns this job alone.
type job struct {
	size int
	run  func(g *group) error
	own  func() error // instead of run: something that makes its own transactions while nobody else writes
	err  error
	done chan struct{}
}

var errBusy = &Error{Code: "busy", Text: "The store is busy. Nothing was kept; send the same again in a moment."}

// do queues a job and waits for its answer. When ctx ends first the job may still be done: all jobs can be sent again.
func (s *Store) do(ctx context.Context, size int, run func(g *group) error) error {
	return s.enqueue(ctx, &job{size: size, run: run, done: make(chan struct{})})
}

// alone runs something that makes its own transactions, while nobody else writes.
func (s *Store) alone(ctx context.Context, own func() error) error {
	return s.enqueue(ctx, &job{size: groupLimit, own: own, done: make(chan struct{})})
}

func (s *Store) enqueue(ctx context.Context, j *job) error {
	s.mu.RLock()
	if s.closed {
		s.mu.RUnlock()
		return errClosed
	}
	select {
	case s.queue <- j:
		s.mu.RUnlock()
	default:
		s.mu.RUnlock()
		return errBusy
	}
	select {
	case <-j.done:
		return j.err
	case <-ctx.Done():
		return fmt.Errorf("waiting for the store: %w", ctx.Err())
	}
}

// write is the one writer: it takes what is queued, commits it together with a part of the work list, answers all.
func (s *Store) write() {
	defer close(s.written)
	crowd := 1
	for {
		first, part, ok := s.next()
		if !ok {
			return
		}
		jobs := s.gather(first, crowd)
		s.commit(slices.DeleteFunc(slices.Clone(jobs), func(j *job) bool { return j.own != nil }), part)
		for _, j := range jobs {
			if j.own != nil {
				j.err = j.own()
				s.work.left = true
			}
		}
		crowd = len(jobs) + len(s.queue)
		for _, j := range jobs {
			close(j.done)
		}
	}
}

// next waits for a job, or for a part of the work list that is ready, and gives both where both are there.
func (s *Store) next() (first *job, part *ahead, ok bool) {
	w := &s.work
	for {
		w.ask(s)
		select {
		case first, ok = <-s.queue:
			w.pushed = true
			select {
			case part = <-w.ready:
				part = w.take(part)
			default:
			}
			if !ok && w.asked {
				<-w.ready // it reads the file, which is about to be closed
			}
			return first, part, ok
		case part = <-w.ready:
			if part = w.take(part); part == nil {
				continue
			}
			if !w.pushed {
				return nil, part, true
			}
			select {
			case first, ok = <-s.queue:
				return first, part, ok
			case <-time.After(partWait):
				return nil, part, true
			}
		}
	}
}

// Groups counts the transactions committed since the store was opened: records through groups says how many arrivals
// share one flush of the disk.
func (s *Store) Groups() int64 { return s.groups.Load() }

// gather takes what is queued; first may be nil, then it waits for nobody. Callers that have just been answered are likely to come again at once: it waits for as
// many as were answered or queued at the last commit, but never longer than gatherWait, so that fewer and larger commits
// are made. A caller on its own never waits.
func (s *Store) gather(first *job, crowd int) (jobs []*job) {
	n := 0
	if first == nil {
		crowd = 0
	} else {
		jobs, n = append(jobs, first), first.size
	}
	var late <-chan time.Time
	for n < groupLimit {
		select {
		case more, ok := <-s.queue:
			if !ok {
				return jobs
			}
			jobs, n = append(jobs, more), n+more.size
			continue
		default:
		}
		if len(jobs) >= crowd {
			return jobs
		}
		if late == nil {
			late = time.After(gatherWait)
		}
		select {
		case more, ok := <-s.queue:
			if !ok {
				return jobs
			}
			jobs, n = append(jobs, more), n+more.size
		case <-late:
			return jobs
		}
	}
	return jobs
}

// spoilt is a job that failed after it had changed something: the group is done again without it.
type spoilt struct {
	job *job
	err error
}

func (e *spoilt) Error() string { return e.err.Error() }

// commit decides a group in one transaction, and a part of the work list in the same, nil for none.
func (s *Store) commit(jobs []*job, part *ahead) {
	for len(jobs) > 0 || part != nil {
		err := s.update(jobs, part)
		var one *spoilt
		switch {
		case errors.As(err, &one):
			one.job.err = one.err
			jobs = slices.DeleteFunc(jobs, func(j *job) bool { return j == one.job })
			continue
		case errors.Is(err, errWork):
			s.work.left, part = false, nil // stays on the list; tried again after the next group
			continue
		case err != nil:
			s.work.left = false
			for _, j := range jobs {
				j.err = &Error{Code: "unavailable", Text: "The store could not be written (" + err.Error() + "). Nothing of this was kept; send it again when the disk has room and works."}
			}
		}
		return
	}
}

// errWork is why a part of the work list could not be done; the jobs beside it are not to blame.
var errWork = errors.New("work list")

func (s *Store) update(jobs []*job, part *ahead) error {
	worked, changes := time.Duration(0), 0
	left := false
	err := s.db.Update(func(tx *bbolt.Tx) error {
		if began := time.Now(); part != nil {
			if _, err := workOff(tx, part.cost, part); err != nil {
				return fmt.Errorf("%w: %w", errWork, err)
			}
			worked = time.Since(began)
		}
		g := newGroup(s, tx)
		for _, j := range jobs {
			before := g.changes
			j.err = j.run(g)
			if j.err != nil && g.changes != before {
				return &spoilt{j, j.err}
			}
		}
		if changes = g.changes; changes == 0 {
			if left = listed(tx); part == nil {
				return errNothing
			}
			return nil
		}
		if err := g.flush(); err != nil {
			return err
		}
		left = listed(tx)
		if s.faults.commit != nil {
			return s.faults.commit()
		}
		return nil
	})
	if err != nil && !errors.Is(err, errNothing) {
		return err
	}
	s.work.left = left
	if part != nil {
		s.work.adapt(part.cost, worked)
	}
	if changes == 0 {
		return nil
	}
	s.groups.Add(1)
	if s.faults.answer != nil {
		return s.faults.answer()
	}
	return nil
}

// errNothing ends a transaction that changes nothing without two flushes of the disk.
var errNothing = errors.New("nothing to write")
