package view

import (
	"context"
	"errors"
	"sync"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// ErrSaverClosed is returned by Saver.Queue after Close.
var ErrSaverClosed = errors.New("this window is closing; nothing more can be entered")

// Write is one atomic write to the store: all of it becomes durable, or nothing does.
type Write func(ctx context.Context) error

// SaveState is what the screen says about saving.
type SaveState struct {
	Queued, Saved uint64 // numbers of the last write queued and the last acknowledged
	Err           error  // why the last try failed; nil while all goes well
	Refused       error  // the last write that the store refused for good; the screen shows the stored value again
}

// Waiting returns how many writes are not yet saved.
func (s SaveState) Waiting() int { return int(s.Queued - s.Saved) }

// Words says it in words: saved, or how many entries are not, and why.
func (s SaveState) Words() string {
	n := s.Waiting()
	switch {
	case n == 0:
		return words.T("Saved here")
	case s.Err != nil:
		return words.N(n, "%d entry not yet saved: %s", "%d entries not yet saved: %s", n, s.Err.Error())
	}
	return words.N(n, "%d entry not yet saved", "%d entries not yet saved", n)
}

// Saver carries writes to the store in the order they were queued, one at a time, on a
// goroutine of its own. Queueing never waits for the disk. A write that fails is tried
// again, at growing intervals up to five seconds, before anything behind it, so that
// the order of keys is the order on disk.
type Saver struct {
	onUI    OnUI
	changed func(SaveState)
	wake    chan struct{}
	done    chan struct{}
	now     chan struct{} // tells a waiting retry to try at once

	mu     sync.Mutex
	queue  []Write
	state  SaveState
	closed bool
	told   bool // a report to the screen is under way
	ctx    context.Context
	cancel context.CancelFunc
}

// Retry intervals of a failed write (common practice: short at first, never long
// enough that a mended disk is not noticed).
const (
	firstRetry = 100 * time.Millisecond
	lastRetry  = 5 * time.Second
)

// NewSaver starts the writer. changed is called through onUI whenever the state has
// changed, not once for every write; it may be nil.
func NewSaver(onUI OnUI, changed func(SaveState)) *Saver {
	ctx, cancel := context.WithCancel(context.Background())
	s := &Saver{onUI: onUI, changed: changed, wake: make(chan struct{}, 1), done: make(chan struct{}),
		now: make(chan struct{}, 1), ctx: ctx, cancel: cancel}
	go s.run()
	return s
}

// Queue adds a write and returns its number, from 1. It never blocks on the disk.
func (s *Saver) Queue(w Write) (uint64, error) {
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return 0, ErrSaverClosed
	}
	s.queue = append(s.queue, w)
	s.state.Queued++
	n := s.state.Queued
	s.mu.Unlock()
	poke(s.wake)
	s.tell()
	return n, nil
}

// State returns the numbers as they stand.
func (s *Saver) State() SaveState {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.state
}

// Retry tries a failed write again at once.
func (s *Saver) Retry() { poke(s.now) }

// Flush waits until everything queued so far is saved, or ctx ends.
func (s *Saver) Flush(ctx context.Context) error {
	target := s.State().Queued
	tick := time.NewTicker(2 * time.Millisecond)
	defer tick.Stop()
	for {
		st := s.State()
		if st.Saved >= target {
			return nil
		}
		select {
		case <-ctx.Done():
			if st.Err != nil {
				return st.Err
			}
			return ctx.Err()
		case <-tick.C:
		}
	}
}

// Close takes no more writes, waits until all are saved and ends the writer. If ctx
// ends first, the writes not yet saved are given up and the error says how many.
func (s *Saver) Close(ctx context.Context) error {
	s.mu.Lock()
	s.closed = true
	s.mu.Unlock()
	poke(s.wake)
	select {
	case <-s.done:
		return nil
	case <-ctx.Done():
		s.cancel()
		<-s.done
		if st := s.State(); st.Waiting() > 0 {
			return errors.New(st.Words())
		}
		return nil
	}
}

// refusal reports whether an error can never be mended by trying again: the value
// itself is not allowed.
func refusal(err error) bool {
	var invalid *exam.Invalid
	return errors.As(err, &invalid)
}

func poke(c chan struct{}) {
	select {
	case c <- struct{}{}:
	default:
	}
}

// tell reports the state to the screen, at most one report being under way.
func (s *Saver) tell() {
	if s.changed == nil {
		return
	}
	s.mu.Lock()
	if s.told {
		s.mu.Unlock()
		return
	}
	s.told = true
	s.mu.Unlock()
	s.onUI(func() {
		s.mu.Lock()
		s.told = false
		st := s.state
		s.mu.Unlock()
		s.changed(st)
	})
}

func (s *Saver) run() {
	defer close(s.done)
	wait := firstRetry
	for {
		s.mu.Lock()
		var w Write
		if len(s.queue) > 0 {
			w = s.queue[0]
		}
		closed := s.closed
		s.mu.Unlock()
		if w == nil {
			if closed {
				return
			}
			<-s.wake
			continue
		}
		err := w(s.ctx)
		s.mu.Lock()
		s.state.Err = err
		if final := err != nil && refusal(err); err == nil || final {
			if final {
				s.state.Refused, s.state.Err = err, nil
			}
			s.queue[0] = nil
			s.queue = s.queue[1:]
			s.state.Saved++
			err = nil
		}
		s.mu.Unlock()
		s.tell()
		if err == nil {
			wait = firstRetry
			continue
		}
		timer := time.NewTimer(wait)
		select {
		case <-s.ctx.Done():
			timer.Stop()
			return
		case <-s.now:
			timer.Stop()
		case <-timer.C:
		}
		wait = min(2*wait, lastRetry)
	}
}
