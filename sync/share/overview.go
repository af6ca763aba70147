package share

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"time"

	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/carry"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/member"
	"cordwalk.example/cordwalk/sync/merge"
)

// metFile remembers what was seen of the other devices at the exchanges so far. It lies beside the list of devices;
// if it is lost, only this memory is.
const (
	metFile = "met.json"
	maxMet  = 4 << 20
)

// Met is what an exchange showed of another device.
type Met struct {
	At      time.Time `json:"at"`      // when this device exchanged last where that one had been
	Left    time.Time `json:"left"`    // when that device exchanged there last, by its own clock
	Lacks   uint64    `json:"lacks"`   // of the entries held here, by what it said then
	Ahead   bool      `json:"ahead"`   // its clock ran more than a day ahead
	Differs bool      `json:"differs"` // it made something else of the same entries
}

// Seen is one device as this one knows it.
type Seen struct {
	member.Device
	This    bool
	Met     Met         // zero where it was never met
	Forked  int         // branches that are held beside the first one: its store was copied and both were used
	Missing []merge.Gap // entries of it that later ones prove and that are not here
}

// Overview returns every device of the practice with what is known of it, members first.
func (sh *Share) Overview(ctx context.Context) ([]Seen, error) {
	held, err := sh.Streams(ctx)
	if err != nil {
		return nil, err
	}
	met := sh.readMet()
	me := sh.Bag().Device.Verifier()
	var out []Seen
	for _, d := range sh.List.Devices() {
		s := Seen{Device: d, This: d.Verifier == me, Met: met[d.Verifier.String()]}
		for _, h := range held {
			if v, ok := sh.List.Signer(h.Of.Device); !ok || v != d.Verifier {
				continue
			}
			if h.Stream != h.Of {
				s.Forked++
			}
			s.Missing = append(s.Missing, merge.Gaps(h.Stream, h.Spans, h.Last)...)
		}
		out = append(out, s)
	}
	return out, nil
}

func (sh *Share) readMet() map[string]Met {
	out := map[string]Met{}
	b, err := disk.ReadFile(sh.fs, sh.path(metFile), maxMet)
	if err == nil && json.Unmarshal(b, &out) != nil {
		return map[string]Met{}
	}
	return out
}

// remember keeps what an exchange showed of the others. It is written only where it says something new, so that an
// idle exchange writes nothing.
func (sh *Share) remember(r carry.Report) error {
	met := sh.readMet()
	changed := false
	newest := map[key.Verifier]carry.Peer{} // a device may have had several names
	for _, p := range r.Peers {
		if old, ok := newest[p.Verifier]; !ok || old.Time < p.Time {
			newest[p.Verifier] = p
		}
	}
	for v, p := range newest {
		m := Met{sh.now().UTC().Truncate(time.Second), p.Time.Time().UTC(), p.Lacks, p.Ahead, p.Differs}
		if old := met[v.String()]; !old.Left.Equal(m.Left) || old.Lacks != m.Lacks || old.Ahead != m.Ahead || old.Differs != m.Differs {
			met[v.String()], changed = m, true
		}
	}
	if !changed {
		return nil
	}
	b, err := json.Marshal(met)
	if err == nil {
		err = disk.Replace(sh.fs, sh.path(metFile), b)
	}
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("keeping what was seen of the other devices: %w", err)
	}
	return nil
}
