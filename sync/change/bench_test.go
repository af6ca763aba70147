package change_test

import (
	"testing"

	"cordwalk.example/cordwalk/sync/change"
)

func BenchmarkSealOne(b *testing.B) {
	c := change.Change{ID: change.NewID(), Time: 1, Kind: change.KindVisit, Field: "finding/patellar pelvic-left", Value: make([]byte, 30), Supersedes: []change.ID{change.NewID()}}
	c.Patient[0], c.Record[0] = 1, 2
	batch := change.Batch{Stream: stream, First: 2, Examiner: "R. Okafor", Changes: []change.Change{c}}
	for b.Loop() {
		if _, err := change.Seal(batch, change.Hash{1}, 1, keyring); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkOpenOne(b *testing.B) {
	frames, data := journal(b, 1000)
	b.SetBytes(int64(len(data) / len(frames)))
	for i := 0; b.Loop(); i++ {
		if _, err := change.Open(frames[i%len(frames)], keyring); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkOpenerOne(b *testing.B) {
	frames, data := journal(b, 1000)
	b.SetBytes(int64(len(data) / len(frames)))
	b.ReportAllocs()
	var o change.Opener
	for i := 0; b.Loop(); i++ {
		if i%256 == 0 {
			o.Reset()
		}
		if _, err := o.Open(frames[i%len(frames)], keyring); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkDecodeOne(b *testing.B) {
	c := change.Change{ID: change.NewID(), Time: 1, Kind: change.KindVisit, Field: "finding/patellar pelvic-left", Value: make([]byte, 30), Supersedes: []change.ID{change.NewID()}}
	data, _ := change.EncodeBatch(change.Batch{Stream: stream, First: 2, Examiner: "R. Okafor", Changes: []change.Change{c}})
	b.ReportAllocs()
	for b.Loop() {
		if _, err := change.DecodeBatch(data, stream, 2, change.Minor); err != nil {
			b.Fatal(err)
		}
	}
}
