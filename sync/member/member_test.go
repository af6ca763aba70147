package member_test

import (
	"bytes"
	"errors"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"filippo.io/age"
	"github.com/fxamacker/cbor/v2"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
)

var (
	site = change.Site{7}
	noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)
)

// Most tests do not need the full cost of a guess; TestJoining runs with it.
func TestMain(m *testing.M) {
	full = member.SetCost(key.Stretch{Time: 1, Memory: 64, Threads: 1})
	os.Exit(m.Run())
}

var full key.Stretch

// device is one device with its own copy of the list.
type device struct {
	t    testing.TB
	name string
	bag  key.Bag
	list *member.List
	inc  change.Incarnation
	tick int
}

func (d *device) now() change.HLC {
	d.tick++
	return change.HLCAt(noon.Add(time.Duration(d.tick) * time.Minute))
}

func (d *device) v() key.Verifier { return d.bag.Device.Verifier() }

func (d *device) stream() change.Stream { return change.Stream{Device: d.inc, Site: site} }

func found(t testing.TB, name string) (*device, *age.X25519Identity) {
	b, err := key.NewBag(exam.ID{1, 2, 3})
	require.NoError(t, err)
	d := &device{t: t, name: name, bag: b, inc: change.NewIncarnation()}
	l, recovery, err := member.Establish(b, name, d.inc, d.now())
	require.NoError(t, err)
	d.list = l
	return d, recovery
}

// join lets a new device in through by.
func join(by *device, name string) *device {
	t := by.t
	inv, code, err := member.NewInvite(by.list, by.bag, site, by.name, noon.Add(time.Hour))
	require.NoError(t, err)
	own, err := key.NewDevice()
	require.NoError(t, err)
	d := &device{t: t, name: name, inc: change.NewIncarnation()}
	j, err := member.Ask(inv.File(), code, own, name, d.inc)
	require.NoError(t, err)
	who, err := inv.Take(j.File(), noon)
	require.NoError(t, err)
	require.Equal(t, j.CheckWords(), who.CheckWords)
	require.NoError(t, by.list.AdmitJoiner(by.bag, who, by.now()))
	d.bag, d.list, err = j.Complete(by.list.Statements())
	require.NoError(t, err)
	return d
}

// meet exchanges lists both ways.
func meet(ds ...*device) {
	for range 2 {
		for _, a := range ds {
			for _, b := range ds {
				_, err := a.list.Learn(b.list.Statements())
				require.NoError(a.t, err)
			}
		}
	}
	for _, d := range ds {
		r, err := d.list.Ring(d.bag.Device.Identity(), d.bag.Ring)
		require.NoError(d.t, err)
		d.bag.Ring = r
	}
}

func members(d *device) (names []string) {
	for _, m := range d.list.Devices() {
		if m.Member() {
			names = append(names, m.Name)
		}
	}
	return names
}

func TestJoining(t *testing.T) {
	defer member.SetCost(member.SetCost(full))
	a, recovery := found(t, "stable laptop")
	b := join(a, "clinic")
	c := join(b, "home")
	meet(a, b, c)
	for _, d := range []*device{a, b, c} {
		require.Equal(t, []string{"clinic", "home", "stable laptop"}, members(d))
		require.Equal(t, a.bag.Ring.Epochs(), d.bag.Ring.Epochs())
		v, ok := d.list.Signer(b.inc)
		require.True(t, ok)
		require.Equal(t, b.v(), v)
	}
	// The recovery sheet opens the practice's keys.
	r, err := c.list.Ring(recovery, nil)
	require.NoError(t, err)
	require.Equal(t, a.bag.Ring.Epochs(), r.Epochs())
	// A stranger's identity does not.
	stranger, err := age.GenerateX25519Identity()
	require.NoError(t, err)
	_, err = c.list.Ring(stranger, nil)
	require.ErrorIs(t, err, change.ErrNoKey)
}

func TestInvitationsAreRefusedForAReason(t *testing.T) {
	a, _ := found(t, "first")
	inv, code, err := member.NewInvite(a.list, a.bag, site, a.name, noon.Add(time.Hour))
	require.NoError(t, err)
	require.Len(t, strings.Split(code, "-"), 5)
	own, err := key.NewDevice()
	require.NoError(t, err)
	ask := func(code string) (*member.Joining, error) {
		return member.Ask(inv.File(), code, own, "x", change.NewIncarnation())
	}
	for _, wrong := range []string{"", "babab", strings.Repeat("babab-", 5), strings.Repeat("babab-", 4) + "xxxxx", code + "-babab", strings.Replace(code, "-", " ", -1)[1:]} {
		_, err := ask(wrong)
		require.Error(t, err, wrong)
	}
	// Capitals and blanks do not matter.
	j, err := ask(" " + strings.ToUpper(strings.ReplaceAll(code, "-", "  ")) + ".")
	require.NoError(t, err)

	t.Run("expired", func(t *testing.T) {
		_, err := inv.Take(j.File(), noon.Add(2*time.Hour))
		require.ErrorIs(t, err, member.ErrExpired)
	})
	t.Run("every flipped byte", func(t *testing.T) {
		for at := range j.File() {
			bad := bytes.Clone(j.File())
			bad[at] ^= 1 << (at % 8)
			_, err := inv.Take(bad, noon)
			require.True(t, errors.Is(err, member.ErrCode) || errors.Is(err, change.ErrMalformed), "byte %d: %v", at, err)
		}
		require.False(t, inv.Used(), "a bad request uses nothing up")
	})
	t.Run("a request for another invitation", func(t *testing.T) {
		other, _, err := member.NewInvite(a.list, a.bag, site, a.name, noon.Add(time.Hour))
		require.NoError(t, err)
		_, err = other.Take(j.File(), noon)
		require.ErrorIs(t, err, member.ErrCode)
	})
	t.Run("used twice, also by a copy", func(t *testing.T) {
		resumed, err := member.ResumeInvite(inv.Secret())
		require.NoError(t, err)
		_, err = resumed.Take(j.File(), noon)
		require.NoError(t, err)
		second, err := ask(code)
		require.NoError(t, err)
		_, err = resumed.Take(second.File(), noon)
		require.ErrorIs(t, err, member.ErrUsed)
		_, err = resumed.Take(j.File(), noon)
		require.ErrorIs(t, err, member.ErrUsed)
	})
	t.Run("a mailbox that replaces the request is seen in the check words", func(t *testing.T) {
		thief, err := key.NewDevice()
		require.NoError(t, err)
		k, err := member.Ask(inv.File(), code, thief, "x", change.NewIncarnation()) // it guessed the code
		require.NoError(t, err)
		who, err := inv.Take(k.File(), noon)
		require.NoError(t, err)
		require.NotEqual(t, j.CheckWords(), who.CheckWords)
	})
	_, _, err = j.Complete(a.list.Statements())
	require.ErrorIs(t, err, change.ErrNoKey)
}

func TestInvitationHoldsNoKey(t *testing.T) {
	a, _ := found(t, "first")
	inv, code, err := member.NewInvite(a.list, a.bag, site, a.name, noon.Add(time.Hour))
	require.NoError(t, err)
	for _, e := range a.bag.Ring.Epochs() {
		require.NotContains(t, string(inv.File()), string(e.Secret[:]))
	}
	require.NotContains(t, string(inv.File()), code)
}

func TestRemoval(t *testing.T) {
	a, recovery := found(t, "a")
	b := join(a, "b")
	c := join(a, "c")
	meet(a, b, c)
	old := c.bag.Ring
	ring, err := a.list.Remove(a.bag, b.v(), "left the practice", []member.Accepted{{Device: b.inc, Site: site, Last: 40}}, a.now())
	require.NoError(t, err)
	a.bag.Ring = ring
	meet(a, c)
	require.Equal(t, []string{"a", "c"}, members(c))
	require.Greater(t, c.bag.Ring.Current(), old.Current(), "from a removal on the practice uses a new key")
	require.Equal(t, a.bag.Ring.Epochs(), c.bag.Ring.Epochs())

	limit, limited := c.list.Limit(b.stream())
	require.True(t, limited)
	require.EqualValues(t, 40, limit)
	limit, limited = c.list.Limit(change.Stream{Device: b.inc, Site: change.Site{9}})
	require.True(t, limited)
	require.Zero(t, limit, "a stream that the removal does not name")
	_, limited = c.list.Limit(a.stream())
	require.False(t, limited)
	_, limited = c.list.Limit(change.Stream{Device: change.NewIncarnation()})
	require.True(t, limited, "nobody knows who that is")

	// The removed device gets the list, not the key; and its word does not count any more.
	meet(a, b, c)
	require.Equal(t, old.Epochs(), b.bag.Ring.Epochs())
	_, err = b.list.Remove(b.bag, c.v(), "revenge", nil, b.now())
	require.ErrorIs(t, err, member.ErrNotMember)
	require.ErrorIs(t, b.list.Announce(b.bag, change.NewIncarnation(), b.now()), member.ErrNotMember)

	// The sheet stays valid.
	r, err := c.list.Ring(recovery, nil)
	require.NoError(t, err)
	require.Equal(t, c.bag.Ring.Current(), r.Current())

	// It can be let in again.
	inv, code, err := member.NewInvite(a.list, a.bag, site, "a", noon.Add(time.Hour))
	require.NoError(t, err)
	j, err := member.Ask(inv.File(), code, b.bag.Device, "b again", b.inc)
	require.NoError(t, err)
	who, err := inv.Take(j.File(), noon)
	require.NoError(t, err)
	require.NoError(t, a.list.AdmitJoiner(a.bag, who, a.now()))
	meet(a, b, c)
	require.Len(t, members(c), 3)
	require.Equal(t, a.bag.Ring.Current(), b.bag.Ring.Current())
}

func TestRecoverySheetLetsADeviceInWhenAllAreLost(t *testing.T) {
	a, sheet := found(t, "a")
	b := join(a, "b")
	meet(a, b)
	ring, err := a.list.Remove(a.bag, b.v(), "", nil, a.now())
	require.NoError(t, err)
	l := member.NewList(a.list.Root())
	_, err = l.Learn(a.list.Statements())
	require.NoError(t, err)
	d, err := key.NewDevice()
	require.NoError(t, err)
	bag, err := l.Recover(sheet, d, "new laptop", change.NewIncarnation(), a.now())
	require.NoError(t, err)
	require.Equal(t, ring.Epochs(), bag.Ring.Epochs())
	_, err = a.list.Learn(l.Statements())
	require.NoError(t, err)
	require.Equal(t, []string{"a", "new laptop"}, members(a))

	other, err := age.GenerateX25519Identity()
	require.NoError(t, err)
	_, err = l.Recover(other, d, "x", change.NewIncarnation(), a.now())
	require.ErrorContains(t, err, "another practice")
}

func TestARemovedDeviceCannotLetAnotherIn(t *testing.T) {
	a, _ := found(t, "a")
	b := join(a, "b")
	c := join(a, "c")
	meet(a, b, c)
	// b does not know of its removal yet, or says so, and lets d in.
	_, err := a.list.Remove(a.bag, b.v(), "stolen", nil, a.now())
	require.NoError(t, err)
	d := join(b, "d")
	meet(a, b, c, d)
	require.Equal(t, []string{"a", "c"}, members(c))
	who, ok := c.list.Device(d.v())
	require.True(t, ok)
	require.True(t, who.Disputed)
	_, limited := c.list.Limit(d.stream())
	require.True(t, limited)
	// Whom b let in before a removed it stays.
	a2, _ := found(t, "a")
	b2 := join(a2, "b")
	d2 := join(b2, "d")
	meet(a2, b2, d2)
	_, err = a2.list.Remove(a2.bag, b2.v(), "", nil, a2.now())
	require.NoError(t, err)
	require.Equal(t, []string{"a", "d"}, members(a2))
}

func TestRemovalsThatContradictEachOther(t *testing.T) {
	a, _ := found(t, "a")
	b := join(a, "b")
	c := join(a, "c")
	meet(a, b, c)
	_, err := a.list.Remove(a.bag, b.v(), "b is stolen", nil, a.now())
	require.NoError(t, err)
	_, err = b.list.Remove(b.bag, a.v(), "a is stolen", nil, b.now())
	require.NoError(t, err)
	meet(a, b, c)
	for _, d := range []*device{a, b, c} {
		require.Equal(t, []string{"c"}, members(d), "both stand")
	}
	contested := c.list.Contested()
	require.Len(t, contested, 2)
	var right member.ID
	for _, r := range contested {
		if r.By == a.v() {
			right = r.ID
		}
	}
	_, err = b.list.Confirm(b.bag, contested[0].ID, b.now())
	require.ErrorIs(t, err, member.ErrNotMember)
	ring, err := c.list.Confirm(c.bag, right, c.now())
	require.NoError(t, err)
	c.bag.Ring = ring
	meet(a, b, c)
	for _, d := range []*device{a, b, c} {
		require.Equal(t, []string{"a", "c"}, members(d))
		require.Empty(t, d.list.Contested())
	}
	require.Equal(t, c.bag.Ring.Current(), a.bag.Ring.Current())
	_, has := b.bag.Ring.Secret(c.bag.Ring.Current())
	require.False(t, has)
}

// Whatever the order in which statements come, with repeats, every device reads the same list.
func TestListIsASet(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	for range 8 {
		first, _ := found(t, "first")
		ds := []*device{first}
		for range 14 {
			d := ds[rng.IntN(len(ds))]
			me, ok := d.list.Device(d.v())
			if !ok || !me.Member() {
				continue
			}
			switch o := ds[rng.IntN(len(ds))]; rng.IntN(6) {
			case 0, 1:
				if len(ds) < 4 {
					ds = append(ds, join(d, string(rune('a'+len(ds)))))
				}
			case 2:
				if who, ok := d.list.Device(o.v()); ok && who.Member() && o != d {
					ring, err := d.list.Remove(d.bag, o.v(), "", []member.Accepted{{Device: o.inc, Site: site, Last: uint64(rng.IntN(9))}}, d.now())
					require.NoError(t, err)
					d.bag.Ring = ring
				}
			case 3:
				require.NoError(t, d.list.Announce(d.bag, change.NewIncarnation(), d.now()))
			case 4:
				if cs := d.list.Contested(); len(cs) > 0 {
					_, err := d.list.Confirm(d.bag, cs[rng.IntN(len(cs))].ID, d.now())
					require.NoError(t, err)
				}
			case 5:
				meet(d, o)
			}
		}
		var all [][]byte
		for _, d := range ds {
			all = append(all, d.list.Statements()...)
		}
		var want []member.Device
		for i := range 4 {
			rng.Shuffle(len(all), func(i, j int) { all[i], all[j] = all[j], all[i] })
			l := member.NewList(first.list.Root())
			for some := range slices.Chunk(all, 3) {
				_, err := l.Learn(some)
				require.NoError(t, err)
			}
			if i == 0 {
				want = l.Devices()
				continue
			}
			require.Equal(t, want, l.Devices())
		}
	}
}

func TestForeignAndForgedStatementsAreDropped(t *testing.T) {
	a, _ := found(t, "a")
	other, _ := found(t, "other practice")
	fresh, err := a.list.Learn(other.list.Statements())
	require.NoError(t, err)
	require.False(t, fresh)
	for _, raw := range a.list.Statements() {
		for at := range raw {
			bad := bytes.Clone(raw)
			bad[at] ^= 1 << (at % 8)
			_, err := member.Parse(bad)
			require.Error(t, err)
		}
	}
	l := member.NewList(a.list.Root())
	l.OnLearn(func([]byte) error { return errors.New("disk full") })
	_, err = l.Learn(a.list.Statements())
	require.ErrorContains(t, err, "disk full")
	require.Empty(t, l.Statements())
}

func FuzzParse(f *testing.F) {
	a, _ := found(f, "a")
	join(a, "b")
	for _, s := range a.list.Statements() {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := member.Parse(data)
		if err == nil && !bytes.Equal(s.Raw(), data) {
			t.Fatal("a statement's bytes are not those that were read")
		}
	})
}

func FuzzTake(f *testing.F) {
	a, _ := found(f, "a")
	inv, code, err := member.NewInvite(a.list, a.bag, site, "a", noon.Add(time.Hour))
	require.NoError(f, err)
	own, err := key.NewDevice()
	require.NoError(f, err)
	j, err := member.Ask(inv.File(), code, own, "x", change.NewIncarnation())
	require.NoError(f, err)
	f.Add(j.File())
	f.Add(inv.File())
	f.Fuzz(func(t *testing.T, data []byte) {
		if bytes.Equal(data, j.File()) {
			return
		}
		i, err := member.ResumeInvite(inv.Secret())
		if err != nil {
			t.Fatal(err)
		}
		if _, err := i.Take(data, noon); err == nil {
			t.Fatal("a request that nobody made was taken")
		}
	})
}

// Removals of the earliest form, which name a number without a chain hash, are read as they are.
func TestAcceptedWithoutAHash(t *testing.T) {
	a, _ := found(t, "a")
	b := join(a, "b")
	_, err := a.list.Remove(a.bag, b.v(), "lost", []member.Accepted{
		{Device: b.inc, Site: site, Last: 40},
		{Device: b.inc, Site: change.Site{2}, Last: 7, Hash: change.Hash{1}},
		{Device: b.inc, Site: change.Site{2}, Last: 9, Hash: change.Hash{2}},
	}, a.now())
	require.NoError(t, err)
	d, _ := a.list.Device(b.v())
	require.Len(t, d.Removals[0].Accepted, 3)
	plain, err := cbor.Marshal(d.Removals[0].Accepted[0])
	require.NoError(t, err)
	require.EqualValues(t, 0xa3, plain[0], "a map of three, as it always was")
	n, _ := a.list.Limit(change.Stream{Device: b.inc, Site: change.Site{2}})
	require.EqualValues(t, 9, n, "the longer branch")
}
