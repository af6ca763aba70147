package carry_test

import (
	"context"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/change"
)

// The real thing: two stores of one practice. The second is made as a restored copy of the
// first, which is the only way to have its keys before anybody was invited.

func storeOptions(s *storage.Store, members *list) carry.Options {
	for _, l := range s.Lives() {
		members.signers[l] = s.Bag().Device.Verifier()
	}
	return carry.Options{Bag: s.Bag, Incarnation: s.Incarnation, Journal: renewing{s, members}, Members: members}
}

// renewing tells the member list of a new incarnation.
type renewing struct {
	*storage.Store
	members *list
}

func (r renewing) Renew(ctx context.Context) error {
	err := r.Store.Renew(ctx)
	r.members.signers[r.Incarnation()] = r.Bag().Device.Verifier()
	return err
}

func patient(name string) exam.Patient {
	return exam.Patient{ID: storage.NewID(), Name: name, Species: exam.Dog}
}

func add(t testing.TB, s *storage.Store, p exam.Patient) {
	_, err := s.Apply(context.Background(), "R. Okafor", storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	require.NoError(t, err)
}

func names(t testing.TB, s *storage.Store) (out []string) {
	cs, err := s.Caseload(context.Background())
	require.NoError(t, err)
	for _, c := range cs {
		out = append(out, c.Name)
	}
	slices.Sort(out)
	return out
}

func exchange(t testing.TB, s *storage.Store, members *list, stick string) carry.Report {
	r, err := carry.Sync(context.Background(), stick, storeOptions(s, members))
	require.NoError(t, err)
	s.Settle()
	return r
}

func TestTwoStores(t *testing.T) {
	stick := t.TempDir()
	members := &list{signers: map[change.Incarnation]keyVerifier{}}
	a, dir := storagetest.OpenDir(t)
	add(t, a, patient("Bramble"))
	require.NoError(t, a.Close())

	// A copy of the whole folder, both used from here on.
	other := filepath.Join(t.TempDir(), "copy")
	copyFolder(t, dir, other)
	a, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	b, err := storage.Open(other, storagetest.Options())
	require.NoError(t, err)
	require.NoError(t, b.Renew(context.Background()))
	add(t, a, patient("Juniper"))
	add(t, b, patient("Pebble"))
	exchange(t, a, members, stick)
	r := exchange(t, b, members, stick)
	require.Positive(t, r.Received)
	require.Empty(t, r.Forks)
	exchange(t, a, members, stick)
	require.Equal(t, []string{"Bramble", "Juniper", "Pebble"}, names(t, a))
	require.Equal(t, names(t, a), names(t, b))

	// Both edit one field: a conflict, the same on both, until a person picks.
	cs, err := a.Caseload(context.Background())
	require.NoError(t, err)
	before, err := a.Patient(cs[0].ID)
	require.NoError(t, err)
	for s, name := range map[*storage.Store]string{a: "Bramble the elder", b: "Bramble the brave"} {
		after := before.Patient
		after.Name = name
		_, err := s.Apply(context.Background(), "T", storage.PatientEdits(before.Patient, after)...)
		require.NoError(t, err)
	}
	exchange(t, a, members, stick)
	exchange(t, b, members, stick)
	exchange(t, a, members, stick)
	for _, s := range []*storage.Store{a, b} {
		rec, err := s.Patient(cs[0].ID)
		require.NoError(t, err)
		require.Len(t, rec.Conflicts, 1)
		require.Len(t, rec.Conflicts[0].Values, 2)
	}
	rec, err := b.Patient(cs[0].ID)
	require.NoError(t, err)
	_, err = b.Resolve(context.Background(), "T", rec.Conflicts[0], 1, "")
	require.NoError(t, err)
	exchange(t, b, members, stick)
	exchange(t, a, members, stick)
	rec, err = a.Patient(cs[0].ID)
	require.NoError(t, err)
	require.Empty(t, rec.Conflicts)

	// Everything is there again after a restart, and checks.
	want := names(t, a)
	require.NoError(t, a.Close())
	require.NoError(t, b.Close())
	for _, d := range []string{dir, other} {
		storagetest.Check(t, d)
		s, err := storage.Open(d, storagetest.Options())
		require.NoError(t, err)
		require.Equal(t, want, names(t, s))
		require.NoError(t, s.Close())
		require.NoError(t, storage.Rebuild(context.Background(), d, storagetest.Options()))
		s, err = storage.Open(d, storagetest.Options())
		require.NoError(t, err)
		require.Equal(t, want, names(t, s))
		r := exchange(t, s, members, stick)
		require.Zero(t, r.Received)
		require.NoError(t, s.Close())
	}
}

func TestACopiedStoreThatNobodyNoticed(t *testing.T) {
	stick := t.TempDir()
	members := &list{signers: map[change.Incarnation]keyVerifier{}}
	a, dir := storagetest.OpenDir(t)
	add(t, a, patient("Bramble"))
	require.NoError(t, a.Close())
	other := filepath.Join(t.TempDir(), "copy")
	copyFolder(t, dir, other)
	a, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	b, err := storage.Open(other, storagetest.Options())
	require.NoError(t, err)
	add(t, a, patient("Juniper"))
	add(t, b, patient("Pebble"))
	add(t, b, patient("Otter"))
	exchange(t, a, members, stick)
	r := exchange(t, b, members, stick)
	require.Len(t, r.Forks, 1)
	add(t, b, patient("Thistle"))
	exchange(t, b, members, stick)
	exchange(t, a, members, stick)
	require.Equal(t, []string{"Bramble", "Juniper", "Otter", "Pebble", "Thistle"}, names(t, a))
	require.Equal(t, names(t, a), names(t, b))
	require.NoError(t, a.Close())
	require.NoError(t, b.Close())
	for _, d := range []string{dir, other} {
		storagetest.Check(t, d)
		s, err := storage.Open(d, storagetest.Options())
		require.NoError(t, err)
		require.Len(t, names(t, s), 5)
		r := exchange(t, s, members, stick)
		require.Zero(t, r.Received)
		require.NoError(t, s.Close())
	}
}

// While a large backlog is taken in, keys are still saved.
func TestRecordingGoesOnWhileReceiving(t *testing.T) {
	stick := t.TempDir()
	members := &list{signers: map[change.Incarnation]keyVerifier{}}
	a, dir := storagetest.OpenDir(t)
	require.NoError(t, a.Close())
	other := filepath.Join(t.TempDir(), "copy")
	copyFolder(t, dir, other)
	a, err := storage.Open(dir, storagetest.Options())
	require.NoError(t, err)
	b, err := storage.Open(other, storagetest.Options())
	require.NoError(t, err)
	require.NoError(t, b.Renew(context.Background()))
	var all []storage.Edit
	for range 400 {
		p := patient("Many")
		p.Breed, p.Status = "collie", exam.Active
		all = append(all, storage.PatientEdits(exam.Patient{ID: p.ID}, p)...)
	}
	for i := 0; i < len(all); i += 10 {
		_, err := a.Apply(context.Background(), "R. Okafor", all[i:min(i+10, len(all))]...)
		require.NoError(t, err)
	}
	exchange(t, a, members, stick)
	done := make(chan struct{})
	n := 0
	go func() {
		defer close(done)
		for end := time.Now().Add(300 * time.Millisecond); time.Now().Before(end); n++ {
			add(t, b, patient("Meanwhile"))
		}
	}()
	exchange(t, b, members, stick)
	<-done
	require.Len(t, names(t, b), 400+n)
	exchange(t, b, members, stick)
	exchange(t, a, members, stick)
	require.Equal(t, names(t, a), names(t, b))
	require.NoError(t, a.Close())
	require.NoError(t, b.Close())
}
