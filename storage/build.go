package storage

import (
	"context"
	"path/filepath"
	"slices"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/key"
)

// build makes the index anew from the journals.
func build(ctx context.Context, fsys disk.FS, dir string, bag key.Bag, s *seals, progress func(string, int64, int64)) (st indexState, problems []Problem, err error) {
	st.Practice = bag.Practice
	segs, err := listSegments(fsys, dir)
	if err != nil {
		return st, nil, err
	}
	var total, done int64
	for _, seg := range segs {
		total += seg.size
	}
	records := map[exam.ID]map[recordKey]*record{}
	for _, seg := range segs {
		rel := journalDir + "/" + filepath.Base(seg.name)
		end := int64(0)
		err := walkSegment(fsys, seg, 0, func(p piece) error {
			if err := ctx.Err(); err != nil {
				return err
			}
			b, news, problem := readPiece(p, st.stream(seg.stream), bag.Ring)
			if problem != "" {
				problems = append(problems, Problem{File: rel, Offset: p.Offset, Length: p.Length, What: problem})
			}
			end = p.end()
			if !news {
				return nil
			}
			for _, c := range b.Changes {
				m := records[c.Patient]
				if m == nil {
					m = map[recordKey]*record{}
					records[c.Patient] = m
				}
				r := m[keyOf(c)]
				if r == nil {
					r = newRecord(keyOf(c))
				}
				m[keyOf(c)] = r.with(c)
				st.Clock = max(st.Clock, c.Time)
			}
			return nil
		})
		if err != nil {
			return st, nil, err
		}
		ss := st.stream(seg.stream)
		ss.Segment, ss.Offset = seg.number, end
		done += seg.size
		progress("building the index", done, total)
	}
	x, err := createIndex(fsys, filepath.Join(dir, indexFile), s)
	if err != nil {
		return st, nil, err
	}
	patients := make([]exam.ID, 0, len(records))
	for p := range records {
		patients = append(patients, p)
	}
	slices.SortFunc(patients, func(a, b exam.ID) int { return slices.Compare(s.patientKey(a), s.patientKey(b)) })
	err = guard(func() error {
		return x.db.Update(func(tx *bbolt.Tx) error {
			for _, p := range patients {
				var rs []*record
				for _, r := range records[p] {
					rs = append(rs, r)
					if r.kind == KindEdge {
						st.setEdges(r)
					}
				}
				if err := x.store(tx, &st, p, rs); err != nil {
					return err
				}
			}
			return x.putState(tx, st)
		})
	})
	if err != nil {
		x.abandon()
		return st, nil, err
	}
	return st, problems, x.finish(fsys, filepath.Join(dir, indexFile))
}


// Rebuild makes the index of a store anew from its journals. The old one is set aside.
func Rebuild(ctx context.Context, dir string, o Options) error {
	o = o.withDefaults()
	return explain("rebuilding the index in "+dir, rebuild(ctx, dir, o))
}

func rebuild(ctx context.Context, dir string, o Options) error {
	if err := holdsPractice(o.Files, dir); err != nil {
		return err
	}
	lock, err := o.Files.Lock(filepath.Join(dir, lockFile), disk.Self(o.Program, o.Now()))
	if err != nil {
		return err
	}
	id, _, err := readIdentity(o.Files, dir)
	if err != nil {
		_ = lock.Keep()
		return err
	}
	bag, err := id.unlock(o.Files, o.Unlock)
	if err != nil {
		_ = lock.Keep()
		return err
	}
	_, problems, err := build(ctx, o.Files, dir, bag, newSeals(bag.Ring), o.Progress)
	for _, p := range problems {
		o.Notice(p.String())
	}
	if err != nil {
		_ = lock.Keep()
		return err
	}
	return lock.Unlock()
}
