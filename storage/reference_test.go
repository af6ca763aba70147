package storage_test

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

func TestReferenceStoreScaledDown(t *testing.T) {
	z := storagetest.ReferenceSize.Scaled(200)
	m, err := storagetest.Reference(filepath.Join(t.TempDir(), "p"), z, 1, storagetest.Options())
	require.NoError(t, err)
	storagetest.Check(t, m.Dir)
	s, err := storage.Open(m.Dir, storagetest.Options())
	require.NoError(t, err)
	rows, err := s.Caseload(ctx)
	require.NoError(t, err)
	require.Len(t, rows, z.Patients+1)
	n := 0
	for _, row := range rows {
		n += row.Visits
	}
	require.Equal(t, z.Patients*z.Visits+z.BigVisits, n)
	for _, id := range m.Patients {
		r, err := s.Patient(id)
		require.NoError(t, err)
		want, cells := z.Visits, z.Findings
		if id == m.Big {
			want, cells = z.BigVisits, z.BigFindings
		}
		require.Len(t, r.Visits, want)
		for _, v := range r.Visits {
			require.Len(t, v.Findings, cells)
		}
	}
	require.NoError(t, s.Close())
}

func BenchmarkRebuild(b *testing.B) {
	z := storagetest.Size{Patients: 2300, Visits: 10, Findings: 40, Together: 1}
	m, err := storagetest.Reference(filepath.Join(b.TempDir(), "p"), z, 1, storagetest.Options())
	require.NoError(b, err)
	b.ReportMetric(float64(m.Changes), "changes")
	for b.Loop() {
		require.NoError(b, storage.Rebuild(ctx, m.Dir, storagetest.Options()))
	}
}

func BenchmarkOpenBigPatient(b *testing.B) {
	z := storagetest.Size{Patients: 10, Visits: 10, Findings: 40, BigVisits: 520, BigFindings: 140, Together: 40}
	m, err := storagetest.Reference(filepath.Join(b.TempDir(), "p"), z, 1, storagetest.Options())
	require.NoError(b, err)
	s, err := storage.Open(m.Dir, storagetest.Options())
	require.NoError(b, err)
	b.ReportAllocs()
	for b.Loop() {
		_, err := s.Patient(m.Big)
		require.NoError(b, err)
	}
	require.NoError(b, s.Close())
}
