package storage

import (
	"context"
	"slices"

	"go.etcd.io/bbolt"

	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/merge"
	"cordwalk.example/cordwalk/sync/segment"
)

// Measure works out the hash of the merged state of each site, for Sums. It reads the whole index, so it
// is done now and then and not at each exchange: what it finds names what was held at that moment.
func (s *Store) Measure(ctx context.Context) error {
	s.Settle()
	if err := s.flush(); err != nil {
		return explain("measuring the state", err)
	}
	var sums map[change.Site]merge.Sum
	var held []segment.Held
	err := s.repairing(func() error {
		sums, held = map[change.Site]merge.Sum{}, nil
		return s.onIndex(func(x *index, tx *bbolt.Tx) error {
			st, err := x.state(tx)
			if err != nil {
				return err
			}
			for _, x := range st.Streams {
				if n := len(x.Spans); n > 0 {
					held = append(held, segment.Held{Stream: x.Stream, Of: x.of(), Spans: x.Spans, Last: x.Spans[n-1].Last, Hash: x.Last})
					sums[x.Stream.Site] = merge.Sum{}
				}
			}
			return tx.Bucket(bucketRecords).ForEach(func(k, v []byte) error {
				if err := ctx.Err(); err != nil {
					return err
				}
				plain, err := x.open(bucketRecords, k, v)
				if err != nil {
					return err
				}
				r, err := decodeRecord(plain)
				if err != nil {
					return err
				}
				for _, f := range r.fields {
					key := merge.Key{Kind: r.kind, Record: r.id, Field: f.name}
					for _, site := range sitesOf(f.versions) {
						vs := f.versions
						if len(sums) > 1 {
							vs = slices.DeleteFunc(slices.Clone(vs), func(c change.Change) bool { return c.Stream.Site != site })
						}
						sums[site] = sums[site].Add(merge.FieldHash(key, vs))
					}
				}
				return nil
			})
		})
	})
	if err != nil {
		return explain("measuring the state", err)
	}
	var out []segment.Sum
	for site, sum := range sums {
		out = append(out, segment.Sum{Site: site, Rules: merge.Rules, At: segment.HashOfHeld(site, held), Sum: sum})
	}
	slices.SortFunc(out, func(a, b segment.Sum) int { return slices.Compare(a.Site[:], b.Site[:]) })
	s.exch.Lock()
	defer s.exch.Unlock()
	s.sums = out
	return nil
}

func sitesOf(vs []change.Change) (out []change.Site) {
	for _, v := range vs {
		if !slices.Contains(out, v.Stream.Site) {
			out = append(out, v.Stream.Site)
		}
	}
	return out
}
