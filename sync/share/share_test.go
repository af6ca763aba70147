package share_test

import (
	"context"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/share"
	"cordwalk.example/cordwalk/sync/share/sharetest"
)

var ctx = context.Background()

const who = "R. Okafor"

func first(t *testing.T) (*share.Share, string) {
	s, dir := storagetest.OpenDir(t)
	sh, recovery, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	require.NotNil(t, recovery)
	return sh, dir
}

func sync(t *testing.T, stick string, shs ...*share.Share) {
	t.Helper()
	for _, sh := range shs {
		_, err := sh.Folder(ctx, stick, nil)
		require.NoError(t, err)
		sh.Settle()
	}
}

// join lets a new device in, in two trips of a stick.
func join(t *testing.T, by *share.Share, stick, name string) (*share.Share, string) {
	sync(t, stick, by)
	code, err := by.Invite(ctx, who, stick, time.Hour)
	require.NoError(t, err)

	letters, err := carry.Letters(disk.OS(), stick, ".invite")
	require.NoError(t, err)
	require.Len(t, letters, 1)
	own, err := key.NewDevice()
	require.NoError(t, err)
	inc := change.NewIncarnation()
	j, err := member.Ask(letters[0].Data, code, own, name, inc)
	require.NoError(t, err)
	require.NoError(t, carry.LeaveLetter(disk.OS(), stick, carry.Letter{Practice: j.Practice(), Name: j.FileName(), Data: j.File()}))
	dir := filepath.Join(t.TempDir(), "joined")
	_, err = share.Join(ctx, dir, stick, j, inc, storagetest.Options(), share.Options{})
	require.ErrorIs(t, err, change.ErrNoKey, "nobody let it in yet")

	asked, refused, err := by.Requests(ctx, stick)
	require.NoError(t, err)
	require.Empty(t, refused)
	require.Len(t, asked, 1)
	require.Equal(t, j.CheckWords(), asked[0].CheckWords)
	require.NoError(t, by.Admit(ctx, who, stick, asked[0]))
	sync(t, stick, by)

	sh, err := share.Join(ctx, dir, stick, j, inc, storagetest.Options(), share.Options{})
	require.NoError(t, err)
	t.Cleanup(func() {
		require.NoError(t, sh.Close())
		storagetest.Check(t, dir)
	})
	return sh, dir
}

func add(t *testing.T, s *share.Share, name string) exam.ID {
	p := exam.Patient{ID: storage.NewID(), Name: name, Species: exam.Dog}
	_, err := s.Apply(ctx, who, storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
	return p.ID
}

func names(t *testing.T, s *share.Share) (out []string) {
	s.Settle()
	cs, err := s.Caseload(ctx)
	require.NoError(t, err)
	for _, c := range cs {
		out = append(out, c.Name)
	}
	slices.Sort(out)
	return out
}

func TestADeviceJoinsByStick(t *testing.T) {
	stick := t.TempDir()
	a, dir := first(t)
	add(t, a, "Bramble")
	b, _ := join(t, a, stick, "clinic")
	require.Equal(t, []string{"Bramble"}, names(t, b))
	add(t, b, "Juniper")
	sync(t, stick, b, a)
	require.Equal(t, []string{"Bramble", "Juniper"}, names(t, a))

	entries, err := audit.Read(ctx, b.Store, time.Time{})
	require.NoError(t, err)
	var did []string
	for _, e := range entries {
		did = append(did, string(e.Did)+" "+e.What)
	}
	require.Contains(t, did, "let a device in clinic")
	require.Contains(t, did, "made patient")

	// The list lies beside the store: nothing is founded twice.
	require.NoError(t, a.Close())
	s, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	again, recovery, err := share.Open(ctx, s, share.Options{})
	require.NoError(t, err)
	require.Nil(t, recovery)
	require.Len(t, again.List.Devices(), 2)
	add(t, again, "Pebble")
	sync(t, stick, again, b)
	require.Len(t, names(t, b), 3)
	require.NoError(t, again.Close())
}

func TestARequestIsTakenOnceAndOnlyWithTheCode(t *testing.T) {
	stick := t.TempDir()
	a, _ := first(t)
	sync(t, stick, a)
	code, err := a.Invite(ctx, who, stick, time.Hour)
	require.NoError(t, err)
	letters, err := carry.Letters(disk.OS(), stick, ".invite")
	require.NoError(t, err)
	own, err := key.NewDevice()
	require.NoError(t, err)
	_, err = member.Ask(letters[0].Data, "babab-babab-babab-babab-babab", own, "x", change.NewIncarnation())
	require.ErrorIs(t, err, member.ErrCode)
	for _, name := range []string{"one", "two"} { // two devices use one code
		d, err := key.NewDevice()
		require.NoError(t, err)
		j, err := member.Ask(letters[0].Data, code, d, name, change.NewIncarnation())
		require.NoError(t, err)
		require.NoError(t, carry.LeaveLetter(disk.OS(), stick, carry.Letter{Practice: j.Practice(), Name: j.FileName(), Data: j.File()}))
	}
	asked, refused, err := a.Requests(ctx, stick)
	require.NoError(t, err)
	require.Len(t, asked, 1)
	require.Len(t, refused, 1)
	require.NoError(t, a.Refuse(ctx, who, stick, asked[0]))
	asked, _, err = a.Requests(ctx, stick)
	require.NoError(t, err)
	require.Empty(t, asked, "the invitation is used up")
}

func TestARemovedDevice(t *testing.T) {
	stick := t.TempDir()
	a, dir := first(t)
	b, _ := join(t, a, stick, "stolen")
	c, _ := join(t, a, stick, "third")
	add(t, b, "Before")
	sync(t, stick, b, a, c, b)
	late := add(t, b, "After")
	sync(t, stick, b, c) // c has it already, a does not know
	require.Contains(t, names(t, c), "After")

	require.NoError(t, a.Remove(ctx, who, b.Bag().Device.Verifier(), "left in a train"))
	sync(t, stick, a, c, a)
	for _, d := range []*share.Share{a, c} {
		require.Equal(t, []string{"Before"}, names(t, d), "what came later does not count, also where it was there before")
		q, err := d.Quarantined(ctx)
		require.NoError(t, err)
		require.NotEmpty(t, q)
		require.Equal(t, late, q[0].Patient)
	}
	require.Equal(t, a.Bag().Ring.Current(), c.Bag().Ring.Current())
	sync(t, stick, b)
	require.False(t, b.Member())
	_, has := b.Bag().Ring.Secret(a.Bag().Ring.Current())
	require.False(t, has)
	add(t, a, "Secret")
	sync(t, stick, a, c)
	require.Contains(t, names(t, c), "Secret")

	// A person takes the late entry in.
	q, err := c.Quarantined(ctx)
	require.NoError(t, err)
	for _, x := range q {
		_, err := c.Apply(ctx, who, storage.Admit(x, "asked the colleague"))
		require.NoError(t, err)
	}
	sync(t, stick, c, a)
	require.Equal(t, []string{"After", "Before", "Secret"}, names(t, a))
	require.NoError(t, a.Close())
	s, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	defer s.Close()
	cs, err := s.Caseload(ctx)
	require.NoError(t, err)
	require.Len(t, cs, 3)
}

func TestViewsAreNotedOncePerDay(t *testing.T) {
	a, _ := first(t)
	v, err := audit.OpenViews(a.Store, nil)
	require.NoError(t, err)
	p := add(t, a, "Bramble")
	day := time.Date(2026, 3, 2, 9, 0, 0, 0, time.UTC)
	for range 3 {
		require.NoError(t, v.Note(who, p, day))
	}
	require.NoError(t, v.Note(who, p, day.AddDate(0, 0, 1)))
	require.NoError(t, v.Note("T", p, day))
	require.Len(t, v.All(time.Time{}), 3)
	again, err := audit.OpenViews(a.Store, nil)
	require.NoError(t, err)
	require.Equal(t, v.All(time.Time{}), again.All(time.Time{}))
	require.Len(t, again.All(day.AddDate(0, 0, 2)), 0)
	raw, err := disk.ReadFile(disk.OS(), filepath.Join(a.Dir(), "views.log"), 1<<20)
	require.NoError(t, err)
	require.False(t, strings.Contains(string(raw), who), "it is sealed")
}

// Devices that hold the same come to the same hash of what they show.
func TestStatesAreCompared(t *testing.T) {
	stick := t.TempDir()
	a, _ := first(t)
	b, _ := join(t, a, stick, "b")
	add(t, a, "Bramble")
	add(t, b, "Juniper")
	sync(t, stick, a, b, a, b)
	for _, sh := range []*share.Share{a, b} {
		require.NoError(t, sh.Measure(ctx))
	}
	sa, err := a.Sums(ctx)
	require.NoError(t, err)
	sb, err := b.Sums(ctx)
	require.NoError(t, err)
	require.Len(t, sa, 1)
	require.Equal(t, sa, sb)
	sync(t, stick, a)
	r, err := b.Folder(ctx, stick, nil)
	require.NoError(t, err)
	require.False(t, r.Peers[0].Differs)

	add(t, a, "Pebble")
	require.NoError(t, a.Measure(ctx))
	later, err := a.Sums(ctx)
	require.NoError(t, err)
	require.NotEqual(t, sa[0].At, later[0].At)
	require.NotEqual(t, sa[0].Sum, later[0].Sum)
}

// The key that a removal brings opens what was written with it in the same exchange.
func TestANewKeyServesInTheExchangeThatBringsIt(t *testing.T) {
	stick := t.TempDir()
	a := sharetest.Found(t)
	b, c := sharetest.Join(t, a, "b"), sharetest.Join(t, a, "c")
	sync(t, stick, a, b, c)
	require.NoError(t, a.Remove(ctx, who, b.Bag().Device.Verifier(), "sold"))
	sharetest.Add(t, a, "With the new key")
	sync(t, stick, a)
	r, err := c.Folder(ctx, stick, nil)
	require.NoError(t, err)
	require.Empty(t, r.Waiting)
	require.Equal(t, []string{"With the new key"}, names(t, c))
}
