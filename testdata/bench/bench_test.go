// Package bench measures storage against SQLite and bare bbolt. It is a module of its own, since
// SQLite is C. Every benchmark does both sides in turn in one run and reports their ratio.
package bench

import (
	"context"
	"database/sql"
	"encoding/binary"
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"

	_ "github.com/mattn/go-sqlite3"
	"github.com/stretchr/testify/require"
	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/storagetest"
)

var ctx = context.Background()

// folder returns a folder on the disk of this module rather than in a temporary file system.
func folder(b *testing.B) string {
	b.Helper()
	dir, err := os.MkdirTemp(".", ".bench")
	require.NoError(b, err)
	b.Cleanup(func() { os.RemoveAll(dir) })
	return dir
}

func sqlite(b *testing.B, dir string) *sql.DB {
	b.Helper()
	db, err := sql.Open("sqlite3", "file:"+filepath.Join(dir, "x.sqlite")+"?_journal_mode=WAL&_synchronous=FULL")
	require.NoError(b, err)
	db.SetMaxOpenConns(1)
	b.Cleanup(func() { db.Close() })
	var mode string
	var level int
	require.NoError(b, db.QueryRow("pragma journal_mode").Scan(&mode))
	require.NoError(b, db.QueryRow("pragma synchronous").Scan(&level))
	require.Equal(b, "wal", mode)
	require.Equal(b, 2, level)
	return db
}

// pair keeps the times of two sides that are measured in turn.
type pair struct{ ours, theirs, oursCPU, theirsCPU time.Duration }

func (p pair) report(b *testing.B, ours, theirs string) {
	b.ReportMetric(0, "ns/op")
	b.ReportMetric(float64(p.ours.Nanoseconds())/float64(b.N)/1e3, "us-"+ours)
	b.ReportMetric(float64(p.theirs.Nanoseconds())/float64(b.N)/1e3, "us-"+theirs)
	b.ReportMetric(float64(p.ours)/float64(p.theirs), "ratio")
	if p.theirsCPU > 0 {
		b.ReportMetric(float64(p.oursCPU)/float64(p.theirsCPU), "cpu-ratio")
	}
}

func timed(d *time.Duration, f func()) {
	t := time.Now()
	f()
	*d += time.Since(t)
}

// measured is timed with the processors' time beside it, which tells the cost where the machine is busy.
func measured(d, cpu *time.Duration, f func()) {
	c := processors()
	timed(d, f)
	*cpu += processors() - c
}

// BenchmarkDurableFinding: one finding, from the call to saved, against SQLite storing a row of
// the same number of bytes in a transaction of its own.
func BenchmarkDurableFinding(b *testing.B) {
	dir := folder(b)
	s, err := storage.Create(filepath.Join(dir, "p"), storagetest.Options())
	require.NoError(b, err)
	p := exam.Patient{ID: storage.NewID(), Name: "Bramble", Species: exam.Dog}
	v := exam.Visit{ID: storage.NewID(), Patient: p.ID, Examined: time.Now(), Examiner: "A"}
	_, err = s.Apply(ctx, "A", append(storage.PatientEdits(exam.Patient{}, p), storage.VisitEdits(exam.Visit{}, v)...)...)
	require.NoError(b, err)
	db := sqlite(b, dir)
	_, err = db.Exec("create table frame (seq integer primary key, raw blob)")
	require.NoError(b, err)
	insert, err := db.Prepare("insert into frame values (?, ?)")
	require.NoError(b, err)
	// The length of a frame of one finding; see DEVELOPERS.md.
	raw := make([]byte, 300)
	cells := []exam.Finding{}
	for _, i := range exam.Items() {
		for _, at := range i.Info().Sites {
			cells = append(cells, exam.Finding{Item: i, Site: at})
		}
	}
	var t pair
	n := 0
	one := func() {
		n++
		if n%200 == 0 { // a visit has some 140 cells; then the next one begins
			v.ID = storage.NewID()
			_, err := s.Apply(ctx, "A", storage.VisitEdits(exam.Visit{}, v)...)
			require.NoError(b, err)
		}
		f := cells[n%200]
		f.Result = exam.Graded(f.Item.Info().First)
		binary.BigEndian.PutUint64(raw, uint64(n))
		timed(&t.ours, func() { _, err = s.Apply(ctx, "A", storage.FindingEdit(p.ID, v.ID, f)) })
		require.NoError(b, err)
		timed(&t.theirs, func() { _, err = insert.Exec(n, raw) })
		require.NoError(b, err)
	}
	for range 300 {
		one()
	}
	t = pair{}
	for b.Loop() {
		one()
	}
	t.report(b, "cordwalk", "sqlite")
	require.NoError(b, s.Close())
}

// BenchmarkOpenPatient: the patient with 520 visits of 140 findings out of the store, sealed, against SQLite
// reading the same rows in clear into the same structs.
func BenchmarkOpenPatient(b *testing.B) {
	for _, cold := range []bool{false, true} {
		b.Run(map[bool]string{false: "warm", true: "cold"}[cold], func(b *testing.B) {
			dir := folder(b)
			z := storagetest.ReferenceSize
			z.Patients = 400
			m, err := storagetest.Reference(filepath.Join(dir, "p"), z, 1, storagetest.Options())
			require.NoError(b, err)
			db := sqlite(b, dir)
			s, err := storage.Open(m.Dir, storagetest.Options())
			require.NoError(b, err)
			fill(b, db, s, m)
			require.NoError(b, s.Close())
			db.Close()
			open := func() {
				db = sqlite(b, dir)
				s, err = storage.Open(m.Dir, storagetest.Options())
				require.NoError(b, err)
			}
			open()
			var t pair
			var ours storage.Record
			var theirs []exam.Visit
			for b.Loop() {
				if cold {
					require.NoError(b, s.Close())
					db.Close()
					forget(b, dir)
					open()
				}
				timed(&t.ours, func() { ours, err = s.Patient(m.Big) })
				require.NoError(b, err)
				timed(&t.theirs, func() { theirs, err = read(db, m.Big) })
				require.NoError(b, err)
			}
			require.Len(b, ours.Visits, z.BigVisits)
			require.Len(b, theirs, z.BigVisits)
			for i := range theirs {
				require.Equal(b, len(ours.Visits[i].Findings), len(theirs[i].Findings))
			}
			t.report(b, "cordwalk", "sqlite")
			require.NoError(b, s.Close())
		})
	}
}

func fill(b *testing.B, db *sql.DB, s *storage.Store, m storagetest.Made) {
	_, err := db.Exec(`create table visit (id blob primary key, patient blob, examined integer, zone text, examiner text, protocol text);
		create index visit_patient on visit (patient, examined);
		create table finding (visit blob, item integer, site integer, digit integer, joint integer, grade integer, tested integer, reason integer,
			level integer, side integer, how integer, seen integer, block text, note text, primary key (visit, item, site, digit, joint)) without rowid`)
	require.NoError(b, err)
	tx, err := db.Begin()
	require.NoError(b, err)
	for _, id := range m.Patients {
		r, err := s.Patient(id)
		require.NoError(b, err)
		for _, v := range r.Visits {
			_, err = tx.Exec("insert into visit values (?,?,?,?,?,?)", v.ID[:], id[:], v.Examined.Unix(), v.Zone, v.Examiner, v.Protocol)
			require.NoError(b, err)
			for _, f := range v.Findings {
				g, ok := f.Result.Grade()
				_, err = tx.Exec("insert into finding values (?,?,?,?,?,?,?,?,?,?,?,?,?,?)", v.ID[:], f.Item, f.Site, f.Digit, f.Joint, g, ok, f.Result.Reason(), f.Level, f.Side, f.How, f.Seen, f.Block, f.Note)
				require.NoError(b, err)
			}
		}
	}
	require.NoError(b, tx.Commit())
}

// read reads a patient's visits by two prepared statements.
func read(db *sql.DB, patient exam.ID) ([]exam.Visit, error) {
	visits, err := db.Prepare("select id, examined, zone, examiner, protocol from visit where patient = ? order by examined")
	if err != nil {
		return nil, err
	}
	defer visits.Close()
	findings, err := db.Prepare("select item, site, digit, joint, grade, tested, reason, level, side, how, seen, block, note from finding where visit = ? order by item, site, digit, joint")
	if err != nil {
		return nil, err
	}
	defer findings.Close()
	rows, err := visits.Query(patient[:])
	if err != nil {
		return nil, err
	}
	var out []exam.Visit
	for rows.Next() {
		v := exam.Visit{Patient: patient}
		var id []byte
		var at int64
		if err := rows.Scan(&id, &at, &v.Zone, &v.Examiner, &v.Protocol); err != nil {
			return nil, err
		}
		v.ID, v.Examined = exam.ID(id), time.Unix(at, 0)
		out = append(out, v)
	}
	if err := rows.Close(); err != nil {
		return nil, err
	}
	for i := range out {
		rows, err := findings.Query(out[i].ID[:])
		if err != nil {
			return nil, err
		}
		for rows.Next() {
			var f exam.Finding
			var grade int8
			var tested bool
			var reason exam.Reason
			if err := rows.Scan(&f.Item, &f.Site, &f.Digit, &f.Joint, &grade, &tested, &reason, &f.Level, &f.Side, &f.How, &f.Seen, &f.Block, &f.Note); err != nil {
				return nil, err
			}
			if tested {
				f.Result = exam.Graded(grade)
			} else {
				f.Result = exam.Untested(reason)
			}
			out[i].Findings = append(out[i].Findings, f)
		}
		if err := rows.Close(); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// BenchmarkRebuild: the index of a million changes from the journal, sealed, against bare bbolt loading
// a million keys in rising order: the same fields under the same names with the same values, in clear.
func BenchmarkRebuild(b *testing.B) {
	for _, together := range []int{1, 40} {
		b.Run(fmt.Sprintf("findings-in-an-action-%d", together), func(b *testing.B) {
			dir := folder(b)
			z := storagetest.Size{Patients: 2300, Visits: 10, Findings: 40, Together: together}
			m, err := storagetest.Reference(filepath.Join(dir, "p"), z, 1, storagetest.Options())
			require.NoError(b, err)
			keys, values := entries(m.Changes)
			var t pair
			for b.Loop() {
				measured(&t.ours, &t.oursCPU, func() { err = storage.Rebuild(ctx, m.Dir, storagetest.Options()) })
				require.NoError(b, err)
				measured(&t.theirs, &t.theirsCPU, func() { err = load(filepath.Join(dir, "bare.db"), keys, values) })
				require.NoError(b, err)
				require.NoError(b, os.Remove(filepath.Join(dir, "bare.db")))
			}
			b.ReportMetric(float64(m.Changes), "changes")
			t.report(b, "cordwalk", "bbolt")
		})
	}
}

// entries makes the keys (patient, record, field) and values (id, time, stream, value) of so many
// changes, in rising order.
func entries(n int) (keys, values [][]byte) {
	for i := range n {
		k := make([]byte, 16+16+30)
		binary.BigEndian.PutUint64(k, uint64(i/450))
		binary.BigEndian.PutUint64(k[16:], uint64(i/45))
		copy(k[32:], fmt.Sprintf("finding/%04d/pelvic-left", i%45))
		keys = append(keys, k)
		values = append(values, make([]byte, 16+8+8+8+6))
	}
	return keys, values
}

func load(path string, keys, values [][]byte) error {
	db, err := bbolt.Open(path, 0o600, &bbolt.Options{NoSync: true, FreelistType: bbolt.FreelistMapType})
	if err != nil {
		return err
	}
	const some = 100_000
	for i := 0; i < len(keys); i += some {
		err := db.Update(func(tx *bbolt.Tx) error {
			b, err := tx.CreateBucketIfNotExists([]byte("x"))
			if err != nil {
				return err
			}
			b.FillPercent = 0.95
			for k := i; k < min(i+some, len(keys)); k++ {
				if err := b.Put(keys[k], values[k]); err != nil {
					return err
				}
			}
			return nil
		})
		if err != nil {
			return err
		}
	}
	if err := db.Sync(); err != nil {
		return err
	}
	return db.Close()
}

// BenchmarkTenYears reports how large the files of one therapist's practice are after ten years: 8
// visits a day on 220 days a year, 25 findings a visit, each key press an entry of its own.
func BenchmarkTenYears(b *testing.B) {
	dir := folder(b)
	z := storagetest.Size{Patients: 1760, Visits: 10, Findings: 25, Together: 1}
	for b.Loop() {
		os.RemoveAll(filepath.Join(dir, "p"))
		m, err := storagetest.Reference(filepath.Join(dir, "p"), z, 1, storagetest.Options())
		require.NoError(b, err)
		index, err := os.Stat(filepath.Join(m.Dir, "index.db"))
		require.NoError(b, err)
		b.ReportMetric(float64(m.Changes), "changes")
		b.ReportMetric(float64(m.Journal)/1e6, "MB-journal")
		b.ReportMetric(float64(index.Size())/1e6, "MB-index")
		b.ReportMetric(float64(m.Journal)/float64(m.Changes), "bytes/change")
	}
}
