package view

import (
	"context"
	"sync"
)

// Newest runs work off the goroutine that draws, one piece at a time, and delivers only
// the result of the newest question: a question asked while work is under way cancels it.
type Newest[In, Out any] struct {
	onUI OnUI
	work func(context.Context, In) (Out, error)
	done func(Out, error)

	mu      sync.Mutex
	asked   uint64
	waiting *In
	running bool
	cancel  context.CancelFunc
	closed  bool
	idle    sync.WaitGroup
}

// NewNewest makes the runner. done is called through onUI.
func NewNewest[In, Out any](onUI OnUI, work func(context.Context, In) (Out, error), done func(Out, error)) *Newest[In, Out] {
	return &Newest[In, Out]{onUI: onUI, work: work, done: done}
}

// Ask puts a question; it returns at once. In must not be changed afterwards.
func (n *Newest[In, Out]) Ask(in In) {
	n.mu.Lock()
	defer n.mu.Unlock()
	if n.closed {
		return
	}
	n.asked++
	n.waiting = &in
	if n.cancel != nil {
		n.cancel()
	}
	if !n.running {
		n.running = true
		n.idle.Add(1)
		go n.run()
	}
}

func (n *Newest[In, Out]) run() {
	defer n.idle.Done()
	for {
		n.mu.Lock()
		in := n.waiting
		n.waiting = nil
		if in == nil || n.closed {
			n.running = false
			n.mu.Unlock()
			return
		}
		number := n.asked
		ctx, cancel := context.WithCancel(context.Background())
		n.cancel = cancel
		n.mu.Unlock()

		out, err := n.work(ctx, *in)

		n.mu.Lock()
		cancel()
		n.cancel = nil
		stale := number != n.asked || n.closed
		n.mu.Unlock()
		if stale {
			continue
		}
		n.onUI(func() {
			n.mu.Lock()
			late := number != n.asked || n.closed
			n.mu.Unlock()
			if !late {
				n.done(out, err)
			}
		})
	}
}

// Wait returns when nothing is asked or under way any more; for tests and the command line.
func (n *Newest[In, Out]) Wait() { n.idle.Wait() }

// Close cancels what is under way and drops every further question and result.
func (n *Newest[In, Out]) Close() {
	n.mu.Lock()
	n.closed = true
	n.waiting = nil
	if n.cancel != nil {
		n.cancel()
	}
	n.mu.Unlock()
	n.idle.Wait()
}
