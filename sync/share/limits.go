package share

import (
	"context"
	"errors"

	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/member"
)

// Limits works out up to where the entries of removed devices count, for each stream and branch that is held, and
// for those that a removal names and that have not come. It is a function of what is held and of the
// list, whichever branch of a fork a device met first: the branches count that lead to a chain hash which
// the removal names, and what they share with others.
func Limits(ctx context.Context, list *member.List, j carry.Journal, held []carry.Held) (map[change.Stream]uint64, error) {
	out := map[change.Stream]uint64{}
	b := branches{ctx, j, held}
	for _, h := range held {
		most, limited := list.Limit(h.Of)
		if !limited {
			continue
		}
		v, known := list.Signer(h.Of.Device)
		d, _ := list.Device(v)
		if !known || len(d.Removals) == 0 { // a stranger's, or disputed
			out[h.Stream] = most
			continue
		}
		least := ^uint64(0)
		for _, r := range d.Removals {
			n := uint64(0)
			for _, a := range r.Accepted {
				reach, err := b.reach(h, a)
				if err != nil {
					return nil, err
				}
				n = max(n, reach)
			}
			least = min(least, n)
		}
		out[h.Stream] = least
	}
	for _, d := range list.Devices() {
		for _, r := range d.Removals {
			for _, a := range r.Accepted {
				x := a.Stream()
				if _, there := out[x]; !there {
					if n, limited := list.Limit(x); limited {
						out[x] = n
					}
				}
			}
		}
	}
	return out, nil
}

// branches are the journals that are held, some of them branches of one stream.
type branches struct {
	ctx  context.Context
	j    carry.Journal
	held []carry.Held
}

// reach returns up to which number what is held in a journal lies on the way to what was accepted.
func (b branches) reach(h carry.Held, a member.Accepted) (uint64, error) {
	if a.Hash == (change.Hash{}) {
		if a.Stream() == h.Stream {
			return a.Last, nil
		}
		return 0, nil
	}
	if a.Stream() != h.Of {
		return 0, nil
	}
	ok, err := b.leads(h, a)
	if ok || err != nil {
		return a.Last, err
	}
	// Another branch may lead there and have its beginning in this one.
	for _, other := range b.held {
		if other.Of != h.Of || other.Last < a.Last || other.Stream == h.Stream {
			continue
		}
		if ok, err := b.leads(other, a); err != nil {
			return 0, err
		} else if ok {
			return b.shared(h, other)
		}
	}
	if h.Last < a.Last {
		return a.Last, nil // the rest is still to come
	}
	return 0, nil
}

// leads reports whether a journal holds what was accepted, or nothing there that contradicts it.
func (b branches) leads(h carry.Held, a member.Accepted) (ok bool, err error) {
	switch {
	case h.Last < a.Last:
		return false, nil
	case h.Last == a.Last:
		return h.Hash == a.Hash, nil
	}
	err = b.j.Frames(b.ctx, h.Stream, a.Last, func(f change.Frame) error {
		switch {
		case f.Last == a.Last:
			ok = f.Hash() == a.Hash
		case f.First == a.Last+1:
			ok = f.Prev == a.Hash
		case f.First > a.Last: // the entries about there are missing
			ok = h.Stream == h.Of
		}
		return errEnough
	})
	if errors.Is(err, errEnough) {
		err = nil
	}
	return ok, err
}

// shared returns up to which number a branch has its entries in another journal.
func (b branches) shared(in, branch carry.Held) (uint64, error) {
	for range len(b.held) { // a branch may spring from a branch
		if branch.Stream == branch.Of {
			return 0, nil // its own beginning
		}
		var first change.Header
		err := b.j.Frames(b.ctx, branch.Stream, 0, func(f change.Frame) error {
			first = f.Header
			return errEnough
		})
		if !errors.Is(err, errEnough) {
			return 0, err
		}
		if first.First == 1 {
			return 0, nil
		}
		found := false
		for _, h := range b.held {
			if h.Of != branch.Of || h.Stream == branch.Stream {
				continue
			}
			hash, ok, err := b.j.At(b.ctx, h.Stream, first.First-1)
			if err != nil {
				return 0, err
			}
			if !ok || hash != first.Prev {
				continue
			}
			if h.Stream == in.Stream {
				return first.First - 1, nil
			}
			branch, found = h, true
			break
		}
		if !found {
			return 0, nil
		}
	}
	return 0, nil
}

var errEnough = errors.New("enough")
