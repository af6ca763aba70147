package view

import (
	"bytes"
	"context"
	"errors"
	"testing"

	"github.com/stretchr/testify/require"
	"github.com/xuri/excelize/v2"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

const table = "Animal;Species;Breed;Sex;Date of birth;Owner;Phone;Diagnosis;Level;Colour\n" +
	"Fig;canine;Beagle;FS;07.05.2019;Nell Rowan;01632 960 112;disc extrusion;t12-t13;tan\n" +
	"Ash;cat;;m;2020;Cy Marsh;;;;\n" +
	"Fig;dog;;;;Nell Rowan;;;;\n" + // the same animal again
	"Otis;dog;;;;Ida Fenn;;;;\n" + // there already
	";dog;;;;Nobody;;;;\n" +
	"Rex;fish;;;03/04/2019;X;;;;\n" +
	";;;;;;;;;\n"

func TestImportPlan(t *testing.T) {
	tab, err := ReadTable([]byte("\xef\xbb\xbf" + table))
	require.NoError(t, err)
	p := NewImportPlan(tab, []Summary{{Name: "otis", Owner: "Ida Fenn"}})
	require.Equal(t, []ImportField{ImportName, ImportSpecies, ImportBreed, ImportSex, ImportBorn, ImportOwner, ImportPhone, ImportProblem, ImportLevel, IgnoreColumn}, p.Columns)
	require.Len(t, p.Rows, 6, "an empty line is no animal")
	fig := p.Rows[0].Patient
	require.Equal(t, exam.Dog, fig.Species)
	require.Equal(t, exam.Female, fig.Sex)
	require.True(t, fig.Neutered)
	require.EqualValues(t, "2019-05-07", fig.Born)
	require.Equal(t, "T12-T13", fig.Problems[0].Level)
	require.Equal(t, "line 2 of the table is the same animal", p.Rows[2].Duplicate)
	require.Equal(t, "otis of Ida Fenn is in the practice already", p.Rows[3].Duplicate)
	require.Contains(t, p.Rows[4].Problems, "name")
	require.Contains(t, p.Rows[5].Problems, "species")
	require.Contains(t, p.Rows[5].Problems, "born", "day and month in unclear order are not guessed")
	require.Equal(t, 7, p.Rows[5].Line)
	require.Equal(t, "2 animals would be added, 2 seem to be there already, 2 rows have problems.", p.Words())
	p.TakeRow(4, true)
	require.False(t, p.Rows[4].Take, "a row with problems is never written")
	p.TakeRow(3, true)
	take, _, _ := p.Counts()
	require.Equal(t, 3, take)
	p.SetColumn(9, ImportNote)
	require.Equal(t, "tan", p.Rows[0].Patient.Note)
	p.SetColumn(2, ImportName)
	require.Equal(t, IgnoreColumn, p.Columns[0])
}

func TestImportReadsWorkbooks(t *testing.T) {
	f := excelize.NewFile()
	require.NoError(t, f.SetSheetRow("Sheet1", "A1", &[]string{"Name", "Species"}))
	require.NoError(t, f.SetSheetRow("Sheet1", "A2", &[]string{"Fig", "dog"}))
	var b bytes.Buffer
	require.NoError(t, f.Write(&b))
	tab, err := ReadTable(b.Bytes())
	require.NoError(t, err)
	require.Equal(t, "Fig", NewImportPlan(tab, nil).Rows[0].Patient.Name)
	for _, bad := range [][]byte{nil, []byte("\n\n"), []byte("name\n\"open"), {0xff, 0xfe, 'n', 0}, []byte("PK\x03\x04 not a workbook")} {
		_, err := ReadTable(bad)
		require.Error(t, err, "%q", bad)
	}
}

func TestImportIsWrittenAtOnceAndTakenBackAtOnce(t *testing.T) {
	s, err := storage.Create(t.TempDir(), storage.Options{Unlock: storage.Unlock{KeyInStore: true}})
	require.NoError(t, err)
	defer s.Close()
	tab, err := ReadTable([]byte(table))
	require.NoError(t, err)
	p := NewImportPlan(tab, nil)
	names := func() []string {
		list, err := s.Caseload(t.Context())
		require.NoError(t, err)
		var out []string
		for _, x := range Present(list) {
			out = append(out, x.Name)
		}
		return out
	}
	require.Empty(t, names(), "nothing is written before it is confirmed")
	done, err := p.Apply(t.Context(), s, "A. Moor", storage.NewID, nil)
	require.NoError(t, err)
	require.ElementsMatch(t, []string{"Fig", "Ash", "Otis"}, names())
	require.NoError(t, done.Undo(t.Context(), s, "A. Moor"))
	require.Empty(t, names())
	h, err := s.History(done.Patients[0].ID)
	require.NoError(t, err)
	require.NotEmpty(t, h, "the history keeps what was")
}

// failing refuses the n-th write.
type failing struct {
	Keeper
	n int
}

func (f *failing) Apply(ctx context.Context, who string, e ...storage.Edit) (storage.Receipt, error) {
	if f.n--; f.n == 0 {
		return storage.Receipt{}, errors.New("the disk is full")
	}
	return f.Keeper.Apply(ctx, who, e...)
}

func TestImportThatFailsLeavesNothing(t *testing.T) {
	s, err := storage.Create(t.TempDir(), storage.Options{Unlock: storage.Unlock{KeyInStore: true}})
	require.NoError(t, err)
	defer s.Close()
	tab := ImportTable{Headings: []string{"name"}}
	for i := range 250 {
		tab.Rows = append(tab.Rows, []string{"Animal " + string(rune('A'+i/26)) + string(rune('a'+i%26))})
	}
	p := NewImportPlan(tab, nil)
	_, err = p.Apply(t.Context(), &failing{s, 3}, "A. Moor", storage.NewID, nil)
	require.ErrorContains(t, err, "the disk is full")
	list, err := s.Caseload(t.Context())
	require.NoError(t, err)
	require.Zero(t, len(Present(list)))
}
