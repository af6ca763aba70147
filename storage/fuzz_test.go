package storage

import (
	"bytes"
	"reflect"
	"testing"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/sync/change"
)

func sampleRecord() *record {
	r := newRecord(recordKey{KindVisit, exam.ID{1}, exam.ID{2}})
	for i, f := range []string{"finding/patellar/pelvic-left", "finding/patellar/pelvic-left", "closed", "note"} {
		r = r.with(change.Change{Stream: change.Stream{Device: change.Incarnation{9}}, Seq: uint64(i + 1), Examiner: "A", ID: change.ID{byte(i + 1)}, Time: change.HLC(100 + i), Kind: KindVisit,
			Patient: exam.ID{1}, Record: exam.ID{2}, Field: f, Value: encodeText("x"), Supersedes: []change.ID{{7}}, Act: change.Amend, Reason: "r", Seen: []change.ID{{8}}, Before: 3, Extra: []byte{1}})
	}
	return r
}

// What the index holds reads back as it was, and damage is an error, never a panic or a surprise of memory.
func FuzzRecord(f *testing.F) {
	f.Add(sampleRecord().encode())
	f.Fuzz(func(t *testing.T, b []byte) {
		r, err := decodeRecord(b)
		a := assembler{store: &Store{seals: &seals{}}}
		_, _, qerr := a.quickVisit(b)
		if err != nil {
			return
		}
		if qerr != nil {
			t.Fatalf("the short way refuses what the long way takes: %v", qerr)
		}
		a.visitOf(r)
		again, err := decodeRecord(r.encode())
		if err != nil || !bytes.Equal(again.encode(), r.encode()) {
			t.Fatalf("a record changes by being stored: %v", err)
		}
	})
}

func TestRecordReadsBack(t *testing.T) {
	r := sampleRecord()
	got, err := decodeRecord(r.encode())
	if err != nil || !reflect.DeepEqual(got, r) {
		t.Fatalf("%v\n%+v\n%+v", err, got, r)
	}
}

// Any bytes may stand as a value in a change of another device.
func FuzzValue(f *testing.F) {
	f.Add("finding/patellar/pelvic-left", encodeFinding(exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(2), Note: "n", Level: exam.NewVertebra(exam.RegionT, 3)}))
	f.Add("measure/thigh-girth/left/70", encodeMeasure(exam.Measured{Value: 3}))
	f.Add("examined", []byte{1, 0xa2, 1, 0, 3, 0})
	f.Add("owner", pack(wireSealed{Owner: exam.ID{1}, Sealed: []byte{1, 2}}))
	f.Add("doses", encodeValue([]exam.DoseGiven{{Medicine: "m", Hours: 2}}))
	f.Fuzz(func(t *testing.T, name string, b []byte) {
		s := &Store{seals: &seals{}}
		for _, k := range []Kind{KindPatient, KindVisit, KindPractice} {
			s.words(k, name, change.Change{Value: b})
		}
		if cell, ok := bytes.CutPrefix([]byte(name), findingName); ok {
			k, err := cellOf(cell)
			if err != nil {
				return
			}
			if fd, err := decodeFinding(k, b); err == nil {
				again, err := decodeFinding(k, encodeFinding(fd))
				if err != nil || again != fd {
					t.Fatalf("a finding changes by being stored: %v %v %v", fd, again, err)
				}
			}
		}
	})
}

func FuzzIdentity(f *testing.F) {
	id := identity{Format: 1, Site: change.Site{1}.String(), Incarnation: change.Incarnation{2}.String(), Device: "d", Keys: []byte{1}}
	id.Sum, _ = id.sum()
	b, err := id.encode()
	if err != nil {
		f.Fatal(err)
	}
	f.Add(b)
	f.Fuzz(func(t *testing.T, b []byte) {
		if id, err := parseIdentity(b); err == nil {
			if again, err := id.encode(); err != nil || !bytes.Equal(again, b) {
				t.Fatal("two encodings of one identity")
			}
		}
	})
}

func FuzzOwnerSlot(f *testing.F) {
	f.Add(makeSlot([nameSize]byte{1}, make([]byte, slotSealed)))
	f.Fuzz(func(t *testing.T, b []byte) {
		if n, sealed, ok := parseSlot(b); ok && !bytes.Equal(makeSlot(n, sealed), b) {
			t.Fatal("two encodings of one slot")
		}
	})
}
