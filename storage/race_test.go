package storage_test

import (
	"fmt"
	"sync"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

// Several writers and readers at once: each reader sees each writer's numbers only rise, and the end holds the last of each.
func TestManyAtOnce(t *testing.T) {
	s := storagetest.Open(t)
	p, v := patientWithVisit(t, s)
	stop := time.Now().Add(time.Second)
	last := make([]int, len(cells))
	var wg sync.WaitGroup
	fail := func(err error) {
		if err != nil {
			t.Error(err)
		}
	}
	for i, k := range cells {
		wg.Go(func() {
			for n := 1; time.Now().Before(stop) && !t.Failed(); n++ {
				_, err := s.Apply(ctx, fmt.Sprint("writer ", i), storage.FindingEdit(p.ID, v.ID, finding(k, int8(n%3), fmt.Sprint(n))))
				fail(err)
				last[i] = n
			}
		})
	}
	for range 3 {
		wg.Go(func() {
			seen := map[exam.Key]int{}
			for time.Now().Before(stop) && !t.Failed() {
				r, err := s.Patient(p.ID)
				fail(err)
				if err != nil {
					return
				}
				for k, n := range notes(r.Visits[0]) {
					if n < seen[k] {
						t.Errorf("%s went back from %d to %d", k, seen[k], n)
					}
					seen[k] = n
				}
				_, err = s.Caseload(ctx)
				fail(err)
				_, err = s.History(v.ID)
				fail(err)
			}
		})
	}
	wg.Go(func() {
		for time.Now().Before(stop) && !t.Failed() {
			fail(s.Flush())
			time.Sleep(20 * time.Millisecond)
		}
	})
	wg.Wait()
	got, err := s.Visit(v.ID)
	require.NoError(t, err)
	for i, k := range cells {
		require.Equal(t, last[i], notes(got)[k])
	}
}
