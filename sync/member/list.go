package member

import (
	"bytes"
	"cmp"
	"errors"
	"fmt"
	"maps"
	"slices"
	"sync"

	"filippo.io/age"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
)

// Device is a device of the practice, or one that was.
type Device struct {
	Verifier     key.Verifier
	Recipient    string
	Name         string
	Incarnations []change.Incarnation // in the order in which they are known
	By           key.Verifier         // who let it in; itself for the founder
	Removals     []Removal            // that stand; none for a member
	// Disputed is true for a device that was let in by one that was removed at the same time: it
	// counts only once a member lets it in again.
	Disputed bool
}

// Member reports whether the device belongs to the practice.
func (d Device) Member() bool { return len(d.Removals) == 0 && !d.Disputed }

// Removal is a removal that stands.
type Removal struct {
	ID        ID
	By        key.Verifier
	Reason    string
	Time      change.HLC
	Accepted  []Accepted
	Confirmed bool
}

// List is a practice's list of devices. It is safe for use by several goroutines.
type List struct {
	mu      sync.RWMutex
	root    ID
	all     map[ID]*Statement
	waiting map[ID]*Statement // statements whose predecessors have not come yet
	devices map[key.Verifier]*Device
	signers map[change.Incarnation]key.Verifier
	counted map[ID]bool
	save    func([]byte) error
}

// NewList makes an empty list of the practice whose founding statement has this id.
func NewList(root ID) *List {
	l := &List{root: root, all: map[ID]*Statement{}, waiting: map[ID]*Statement{}}
	l.evaluate()
	return l
}

// OnLearn sets a function that keeps each statement that is new. An error keeps it out.
func (l *List) OnLearn(save func(raw []byte) error) { l.save = save }

// Establish makes the list of a new practice with its first device. It returns the recovery
// identity too, which goes on the recovery sheet and nowhere else: it opens the practice's keys, of
// all epochs to come, if every device is lost.
func Establish(b key.Bag, name string, inc change.Incarnation, now change.HLC) (*List, *age.X25519Identity, error) {
	recovery, err := age.GenerateX25519Identity()
	if err != nil {
		return nil, nil, fmt.Errorf("making the recovery key: %w", err)
	}
	s, err := sign(Statement{Kind: Found, Practice: b.Practice, Time: now, Recipient: b.Device.Recipient(), Name: clip(name), Incarnation: inc, Recovery: recovery.Recipient().String(), Recoverer: key.DeviceFrom(recovery).Verifier()}, b.Device)
	if err != nil {
		return nil, nil, err
	}
	l := NewList(s.id)
	if _, err := l.Learn([][]byte{s.raw}); err != nil {
		return nil, nil, err
	}
	if err := l.hand(b, now, l.recipients()); err != nil {
		return nil, nil, err
	}
	return l, recovery, nil
}

func clip(name string) string {
	for len(name) > maxName {
		name = name[:len(name)-1]
	}
	return string(bytes.ToValidUTF8([]byte(name), nil))
}

// Root returns the id of the founding statement, which names the list for ever.
func (l *List) Root() ID { return l.root }

// Statements returns all statements, in the order of their ids.
func (l *List) Statements() [][]byte {
	l.mu.RLock()
	defer l.mu.RUnlock()
	var out [][]byte
	for _, id := range slices.SortedFunc(maps.Keys(l.all), compareIDs) {
		out = append(out, l.all[id].raw)
	}
	return out
}

func compareIDs(a, b ID) int { return bytes.Compare(a[:], b[:]) }

// Learn takes statements in and reports whether anything is new. Statements that do not parse, are of
// another practice, or whose signers never were members are dropped; those that follow others
// which have not come yet wait for them.
func (l *List) Learn(raws [][]byte) (bool, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	for _, raw := range raws {
		s, err := Parse(raw)
		if err != nil || l.all[s.id] != nil || len(l.all)+len(l.waiting) >= MaxStatements {
			continue
		}
		if root := l.all[l.root]; root != nil && root.Practice != s.Practice {
			continue
		}
		if s.Kind == Found && s.id != l.root {
			continue
		}
		l.waiting[s.id] = s
	}
	fresh := false
	for again := true; again; {
		again = false
		for _, id := range slices.SortedFunc(maps.Keys(l.waiting), compareIDs) {
			s := l.waiting[id]
			if !l.complete(s) {
				continue
			}
			delete(l.waiting, id)
			if !l.wasMember(s) {
				continue
			}
			if l.save != nil {
				if err := l.save(s.raw); err != nil {
					return fresh, fmt.Errorf("keeping the member list: %w", err)
				}
			}
			l.all[id] = s
			fresh, again = true, true
		}
	}
	if fresh {
		l.evaluate()
	}
	return fresh, nil
}

func (l *List) complete(s *Statement) bool {
	for _, a := range s.After {
		if l.all[a] == nil {
			return false
		}
	}
	return true
}

// past returns everything that a statement follows.
func (l *List) past(s *Statement) map[ID]bool {
	out := map[ID]bool{}
	todo := slices.Clone(s.After)
	for len(todo) > 0 {
		id := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		if out[id] || l.all[id] == nil {
			continue
		}
		out[id] = true
		todo = append(todo, l.all[id].After...)
	}
	return out
}

// wasMember reports whether the signer was a member as far as the statement knows.
func (l *List) wasMember(s *Statement) bool {
	if s.Kind == Found {
		return s.id == l.root
	}
	if l.recovers(s.Signer) {
		return true
	}
	w := l.world(l.past(s))
	d := w.devices[s.Signer]
	return d != nil && d.Member()
}

// recovers reports whether a signature is the recovery sheet's. Whoever holds the sheet can let a
// device in and confirm a removal when every device is lost or disputed.
func (l *List) recovers(v key.Verifier) bool {
	root := l.all[l.root]
	return root != nil && root.Recoverer == v
}

// world is what a set of statements says.
type world struct {
	devices map[key.Verifier]*Device
	signers map[change.Incarnation]key.Verifier
	counted map[ID]bool // removals that stand
}

// world works out what the statements in a set say, all of whose signers were members as far
// as they knew:
//
//  1. Every removal stands, also two that remove each other's signers, until a device that no
//     removal names confirms one: then what the device that it removes said against others at the
//     same time or later is void.
//  2. A device is a member if the founding or an admission brought it in, and every standing removal
//     of it is known to a later admission.
//  3. An admission, or a new incarnation, by a device with a standing removal that did not know of it
//     counts only if that removal knew of it.
func (l *List) world(in map[ID]bool) world {
	order := slices.SortedFunc(maps.Keys(in), func(a, b ID) int {
		return cmp.Or(cmp.Compare(l.all[a].Time, l.all[b].Time), compareIDs(a, b))
	})
	pasts := map[ID]map[ID]bool{}
	past := func(id ID) map[ID]bool {
		if pasts[id] == nil {
			pasts[id] = l.past(l.all[id])
		}
		return pasts[id]
	}
	w := world{devices: map[key.Verifier]*Device{}, signers: map[change.Incarnation]key.Verifier{}, counted: map[ID]bool{}}
	named := map[key.Verifier]bool{} // by any removal
	for _, id := range order {
		if s := l.all[id]; s.Kind == Remove {
			w.counted[id] = true
			named[s.Subject] = true
		}
	}
	confirmed := map[ID]bool{}
	for _, id := range order {
		s := l.all[id]
		if s.Kind != Confirm || named[s.Signer] || !in[s.Removal] || l.all[s.Removal].Kind != Remove {
			continue
		}
		confirmed[s.Removal] = true
	}
	for c := range confirmed {
		loser := l.all[c].Subject
		for _, id := range order {
			if s := l.all[id]; s.Kind == Remove && s.Signer == loser && !past(c)[id] && !confirmed[id] {
				delete(w.counted, id)
			}
		}
	}
	// standing returns the removals of a device that stand and are not in known.
	standing := func(v key.Verifier, known map[ID]bool) (out []ID) {
		for _, id := range order {
			if w.counted[id] && l.all[id].Subject == v && !known[id] {
				out = append(out, id)
			}
		}
		return out
	}
	// counts reports whether what a device said still counts.
	counts := func(id ID) bool {
		for _, r := range standing(l.all[id].Signer, past(id)) {
			if !past(r)[id] {
				return false
			}
		}
		return true
	}
	for _, id := range order {
		s := l.all[id]
		v := s.Subject
		switch s.Kind {
		case Found:
			v = s.Signer
		case Admit:
		default:
			continue
		}
		ok := s.Kind == Found || counts(id)
		d := w.devices[v]
		if d == nil {
			d = &Device{Verifier: v, Recipient: s.Recipient, Name: s.Name, By: s.Signer, Disputed: true}
			w.devices[v] = d
		}
		if ok {
			d.Disputed = false
		}
		if !slices.Contains(d.Incarnations, s.Incarnation) {
			d.Incarnations = append(d.Incarnations, s.Incarnation)
		}
	}
	for _, id := range order {
		s := l.all[id]
		if d := w.devices[s.Signer]; s.Kind == Announce && d != nil && counts(id) && !slices.Contains(d.Incarnations, s.Incarnation) {
			d.Incarnations = append(d.Incarnations, s.Incarnation)
		}
	}
	for v, d := range w.devices {
		known := map[ID]bool{} // removals that a later admission knew of
		for _, id := range order {
			if s := l.all[id]; s.Kind == Admit && s.Subject == v && counts(id) {
				for p := range past(id) {
					known[p] = true
				}
			}
		}
		for _, id := range standing(v, known) {
			s := l.all[id]
			r := Removal{ID: id, By: s.Signer, Reason: s.Reason, Time: s.Time, Accepted: s.Accepted, Confirmed: confirmed[id]}
			d.Removals = append(d.Removals, r)
		}
		for _, i := range d.Incarnations {
			if old, ok := w.signers[i]; !ok || bytes.Compare(v[:], old[:]) < 0 {
				w.signers[i] = v // two devices under one name: only a hostile one does that
			}
		}
	}
	return w
}

func (l *List) evaluate() {
	in := map[ID]bool{}
	for id := range l.all {
		in[id] = true
	}
	w := l.world(in)
	l.devices, l.signers, l.counted = w.devices, w.signers, w.counted
}

// Devices returns all devices, members first, by name.
func (l *List) Devices() []Device {
	l.mu.RLock()
	defer l.mu.RUnlock()
	var out []Device
	for _, d := range l.devices {
		c := *d
		c.Incarnations, c.Removals = slices.Clone(d.Incarnations), slices.Clone(d.Removals)
		out = append(out, c)
	}
	slices.SortFunc(out, func(a, b Device) int {
		if a.Member() != b.Member() {
			if a.Member() {
				return -1
			}
			return 1
		}
		return cmp.Or(cmp.Compare(a.Name, b.Name), bytes.Compare(a.Verifier[:], b.Verifier[:]))
	})
	return out
}

// Device returns a device by its key.
func (l *List) Device(v key.Verifier) (Device, bool) {
	for _, d := range l.Devices() {
		if d.Verifier == v {
			return d, true
		}
	}
	return Device{}, false
}

// Signer returns the key with which an incarnation signs. Removed devices are known too: what they
// wrote before counts; see Limit.
func (l *List) Signer(i change.Incarnation) (key.Verifier, bool) {
	l.mu.RLock()
	defer l.mu.RUnlock()
	v, ok := l.signers[i]
	return v, ok
}

// NameOf returns the name of the device that wrote under an incarnation, "" if it is not known.
func (l *List) NameOf(i change.Incarnation) string {
	l.mu.RLock()
	defer l.mu.RUnlock()
	if d := l.devices[l.signers[i]]; d != nil {
		return d.Name
	}
	return ""
}

// Limit returns the last number of a stream that may count, and false if all of it does. What
// lies beyond is in quarantine: kept and shown, and part of the record only once a person
// admits it. Of a stream that forked, only the branches whose chain hashes the removal names
// count: see Removal.
func (l *List) Limit(s change.Stream) (uint64, bool) {
	l.mu.RLock()
	defer l.mu.RUnlock()
	v, ok := l.signers[s.Device]
	if !ok {
		return 0, true
	}
	d := l.devices[v]
	if d.Member() {
		return 0, false
	}
	if len(d.Removals) == 0 {
		return 0, true // disputed
	}
	limit := ^uint64(0)
	for _, r := range d.Removals {
		n := uint64(0)
		for _, a := range r.Accepted {
			if a.Stream() == s {
				n = max(n, a.Last)
			}
		}
		limit = min(limit, n)
	}
	return limit, true
}

// Contested returns the removals that contradict each other: a person at a device that none of
// them names must confirm one.
func (l *List) Contested() []Removal {
	l.mu.RLock()
	defer l.mu.RUnlock()
	var out []Removal
	for _, d := range l.devices {
		for _, r := range d.Removals {
			if other := l.devices[r.By]; !r.Confirmed && other != nil && len(other.Removals) > 0 {
				out = append(out, r)
			}
		}
	}
	slices.SortFunc(out, func(a, b Removal) int { return compareIDs(a.ID, b.ID) })
	return out
}

// heads returns the statements that no other one follows.
func (l *List) heads() []ID {
	l.mu.RLock()
	defer l.mu.RUnlock()
	followed := map[ID]bool{}
	for _, s := range l.all {
		for _, a := range s.After {
			followed[a] = true
		}
	}
	var out []ID
	for id := range l.all {
		if !followed[id] {
			out = append(out, id)
		}
	}
	return out
}

// ErrNotMember means that this device does not belong to the practice any more.
var ErrNotMember = errors.New("this device is not a member of the practice")

// state adds a statement of this device to the list.
func (l *List) state(d key.Device, s Statement) (*Statement, error) {
	l.mu.RLock()
	sheet := l.recovers(d.Verifier())
	l.mu.RUnlock()
	if me, ok := l.Device(d.Verifier()); !sheet && (!ok || !me.Member()) {
		return nil, ErrNotMember
	}
	s.After = l.heads()
	done, err := sign(s, d)
	if err != nil {
		return nil, err
	}
	if _, err := l.Learn([][]byte{done.raw}); err != nil {
		return nil, err
	}
	return done, nil
}

// Announce says that this device writes under an incarnation from now on; it does nothing if that
// is known.
func (l *List) Announce(b key.Bag, inc change.Incarnation, now change.HLC) error {
	if v, ok := l.Signer(inc); ok && v == b.Device.Verifier() {
		return nil
	}
	_, err := l.state(b.Device, Statement{Kind: Announce, Practice: b.Practice, Time: now, Incarnation: inc})
	return err
}

// recipients returns to whom keys are sealed: every member and the recovery sheet.
func (l *List) recipients() []string {
	l.mu.RLock()
	defer l.mu.RUnlock()
	var out []string
	for _, d := range l.devices {
		if d.Member() {
			out = append(out, d.Recipient)
		}
	}
	if root := l.all[l.root]; root != nil {
		out = append(out, root.Recovery)
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// hand seals all epochs of the bag to recipients.
func (l *List) hand(b key.Bag, now change.HLC, to []string) error {
	// Statements are small: some recipients each.
	for some := range slices.Chunk(to, 32) {
		s := Statement{Kind: Keys, Practice: b.Practice, Time: now}
		for _, r := range some {
			w, err := wrap(r, b.Ring.Epochs())
			if err != nil {
				return err
			}
			s.Wraps = append(s.Wraps, w)
		}
		if _, err := l.state(b.Device, s); err != nil {
			return err
		}
	}
	return nil
}

// Ring returns the practice's keys as far as they were handed to the identity by devices whose word
// counts, together with those of have, which may be nil. The error is change.ErrNoKey if there
// are none.
func (l *List) Ring(id *age.X25519Identity, have *key.Ring) (*key.Ring, error) {
	l.mu.RLock()
	defer l.mu.RUnlock()
	me := id.Recipient().String()
	ring := have
	for _, sid := range slices.SortedFunc(maps.Keys(l.all), compareIDs) {
		s := l.all[sid]
		if s.Kind != Keys {
			continue
		}
		if d := l.devices[s.Signer]; !l.recovers(s.Signer) && (d == nil || d.Disputed) {
			continue
		}
		for _, w := range s.Wraps {
			if w.To != me {
				continue
			}
			epochs, err := w.unwrap(id)
			if err != nil {
				continue // a member sealed something else: it hands on nothing
			}
			if ring == nil {
				ring, err = key.NewRing(epochs...)
			} else {
				var more *key.Ring
				if more, err = ring.With(epochs...); err == nil {
					ring = more
				}
			}
			if err != nil && ring == nil {
				continue
			}
		}
	}
	if ring == nil {
		return nil, fmt.Errorf("the practice's keys were not handed to this device yet: %w", change.ErrNoKey)
	}
	return ring, nil
}

// Remove takes a device out. accepted is what this device holds of its streams: all beyond is
// quarantined everywhere. It returns the keys with the new epoch that the practice uses from
// now on, handed to every remaining member and the recovery sheet.
func (l *List) Remove(b key.Bag, device key.Verifier, reason string, accepted []Accepted, now change.HLC) (*key.Ring, error) {
	if device == b.Device.Verifier() {
		return nil, errors.New("a device cannot remove itself; do it on another device")
	}
	if d, ok := l.Device(device); !ok || !d.Member() {
		return nil, errors.New("there is no such member")
	}
	if _, err := l.state(b.Device, Statement{Kind: Remove, Practice: b.Practice, Time: now, Subject: device, Reason: reason, Accepted: accepted}); err != nil {
		return nil, err
	}
	return l.renew(b, now)
}

// Confirm settles removals that contradict each other in favour of one. The device must not be named
// by any of them.
func (l *List) Confirm(b key.Bag, removal ID, now change.HLC) (*key.Ring, error) {
	l.mu.RLock()
	s := l.all[removal]
	l.mu.RUnlock()
	if s == nil || s.Kind != Remove {
		return nil, errors.New("there is no such removal")
	}
	if _, err := l.state(b.Device, Statement{Kind: Confirm, Practice: b.Practice, Time: now, Removal: removal}); err != nil {
		return nil, err
	}
	return l.renew(b, now)
}

func (l *List) renew(b key.Bag, now change.HLC) (*key.Ring, error) {
	b.Ring = b.Ring.Next()
	if err := l.hand(b, now, l.recipients()); err != nil {
		return nil, err
	}
	return b.Ring, nil
}

// Finish hands on the keys that should have followed what this device stated: a program that stopped, or a disk that
// failed, may have come between a removal and the new key, or between an admission and the keys for it. It does
// nothing if all was done, or if this device is no member any more.
func (l *List) Finish(b key.Bag, now change.HLC) error {
	me := b.Device.Verifier()
	if d, ok := l.Device(me); !ok || !d.Member() {
		return nil
	}
	to := l.recipients()
	renew, hand := false, false
	l.mu.RLock()
	var mine []*Statement
	got := map[ID]map[string]bool{} // who got keys from somebody who knew of it
	for id, s := range l.all {
		if s.Signer == me && (s.Kind == Remove || s.Kind == Confirm || s.Kind == Admit) {
			mine = append(mine, s)
			got[id] = map[string]bool{}
		}
	}
	for _, s := range l.all {
		if s.Kind != Keys || len(mine) == 0 {
			continue
		}
		past := l.past(s)
		for _, m := range mine {
			if past[m.id] {
				for _, w := range s.Wraps {
					got[m.id][w.To] = true
				}
			}
		}
	}
	for _, m := range mine {
		switch {
		case m.Kind == Admit:
			// Whoever is a member still must have got keys at some time after it.
			if d := l.devices[m.Subject]; d != nil && d.Member() && !got[m.id][d.Recipient] {
				hand = true
			}
		case len(got[m.id]) == 0:
			renew = true
		case slices.ContainsFunc(to, func(r string) bool { return !got[m.id][r] }):
			hand = true
		}
	}
	l.mu.RUnlock()
	if renew {
		_, err := l.renew(b, now)
		return err
	}
	if hand {
		return l.hand(b, now, to)
	}
	return nil
}

// Recovery returns the recipient of the recovery sheet ("age1…"), "" while the founding statement has not come.
func (l *List) Recovery() string {
	l.mu.RLock()
	defer l.mu.RUnlock()
	if root := l.all[l.root]; root != nil {
		return root.Recovery
	}
	return ""
}

// Practice returns the practice's id, zero while the founding statement has not come.
func (l *List) Practice() exam.ID {
	l.mu.RLock()
	defer l.mu.RUnlock()
	if root := l.all[l.root]; root != nil {
		return root.Practice
	}
	return exam.ID{}
}

// Recover lets a new device in with the recovery sheet, where every other device is lost. It returns
// the device's keys with all of the practice's epochs.
func (l *List) Recover(sheet *age.X25519Identity, d key.Device, name string, inc change.Incarnation, now change.HLC) (key.Bag, error) {
	signer := key.DeviceFrom(sheet)
	l.mu.RLock()
	ok := l.recovers(signer.Verifier())
	l.mu.RUnlock()
	if !ok {
		return key.Bag{}, errors.New("this recovery sheet is that of another practice")
	}
	ring, err := l.Ring(sheet, nil)
	if err != nil {
		return key.Bag{}, err
	}
	b := key.Bag{Practice: l.Practice(), Ring: ring, Device: signer}
	if _, err := l.state(signer, Statement{Kind: Admit, Practice: b.Practice, Time: now, Subject: d.Verifier(), Recipient: d.Recipient(), Name: clip(name), Incarnation: inc}); err != nil {
		return key.Bag{}, err
	}
	if err := l.hand(b, now, []string{d.Recipient()}); err != nil {
		return key.Bag{}, err
	}
	b.Device = d
	return b, nil
}
