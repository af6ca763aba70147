// Package carry exchanges journals through a folder: a stick, a network share, or a folder that
// some other program keeps in step between computers.
//
// The folder is a mailbox, never the record. Each device puts what others lack into immutable
// segments and says in one small signed head file what it holds and what it has put there. A
// device that finds nothing new reads one head file per device, whatever the size of the
// history. Nothing that lies in the folder is trusted: names mean nothing, contents are
// checked; half-copied, renamed, doubled and foreign files are recognised and left alone. A folder
// that was emptied is filled again.
//
// Each device writes only files of its own name, so that two devices can use a folder at once,
// and programs that copy folders never meet two versions of one file.
package carry

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"slices"
	"time"

	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/change"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/segment"
)

// Held says what a journal holds of a stream.
type Held = segment.Held

// Journal is what carrying needs of a store.
type Journal interface {
	// Streams returns what is held, in the order of streams.
	Streams(ctx context.Context) ([]Held, error)
	// Frames calls f for each frame held of the stream that ends at number from or later, in order.
	Frames(ctx context.Context, s change.Stream, from uint64, f func(change.Frame) error) error
	// Receive takes frames of another device in, whose memory is the caller's again afterwards. They may
	// be repeats, and need not follow what is held. They are safe when Commit has returned, and readers see them soon after. Under as they are
	// kept and shown: it differs from the frames' own stream for the second branch of a fork.
	Receive(ctx context.Context, as change.Stream, b segment.Block) error
	// Commit makes what was received of a stream durable, and keeps the signed head that covers it, if
	// there is one.
	Commit(ctx context.Context, as change.Stream, head *segment.Signed) error
	// At returns the chain hash at a number at which a frame of the stream ends; false if none does.
	At(ctx context.Context, s change.Stream, last uint64) (change.Hash, bool, error)
	// Signed returns the signed heads that came with a stream of another device, rising.
	Signed(ctx context.Context, s change.Stream) ([]segment.Signed, error)
	// Sums returns the hash of the merged state of each site, as far as one was worked out.
	Sums(ctx context.Context) ([]segment.Sum, error)
	// Renew gives this device a new incarnation: somebody wrote in its name.
	Renew(ctx context.Context) error
}

// Members is the list of devices that belong to the practice.
type Members interface {
	// Signer returns the key with which a device incarnation signs; false for one that is not known.
	Signer(change.Incarnation) (key.Verifier, bool)
	// Statements returns all signed statements that the list is made of.
	Statements() [][]byte
	// Learn takes statements in, drops what it has or what is not valid, and reports whether
	// anything is new.
	Learn(statements [][]byte) (bool, error)
}

// Options of an exchange.
type Options struct {
	Bag         func() key.Bag            // the keys as they are now: an exchange may bring new ones
	Incarnation func() change.Incarnation // the one that this device writes under now
	Journal     Journal
	Members     Members
	Files       Attachments                          // may be nil
	FS          disk.FS                              // nil: the real file system
	Now         func() time.Time                     // nil: time.Now
	Progress    func(what string, done, total int64) // may be nil
	ReceiveOnly bool                                 // leave nothing in the folder
}

// Report tells what an exchange did and found.
type Report struct {
	Received int    // frames taken in
	Sent     int    // frames put into the folder
	Read     int    // files read, for the figures
	Peers    []Peer // the other devices seen in the folder
	Forks    []Fork
	Waiting  []Waiting // what others say is here and is not, or not yet
	Problems []string  // in words, with what to do
	Blocked  error     // why nothing could be left in the folder; nil if all is there
}

// Peer is another device as its head in the folder shows it.
type Peer struct {
	Device   change.Incarnation
	Verifier key.Verifier
	Time     change.HLC
	Ahead    bool // its clock runs more than a day ahead of ours
	Lacks    uint64
	Differs  bool // at equal streams and rules its merged state is another: an alarm
}

// Fork is a stream of which two devices hold different branches: a store was copied and both
// copies were used.
type Fork struct {
	Stream change.Stream
	At     uint64 // the first number that differs
	Other  change.Stream
}

// Waiting is a segment that should be here.
type Waiting struct {
	Stream      change.Stream
	First, Last uint64
	Why         string
}

// Folder names inside the practice's folder.
const (
	headsDir   = "heads"
	dataDir    = "data"
	membersDir = "members"
	filesDir   = "files"
)

// FolderName returns the name of a practice's folder inside an exchange folder.
func FolderName(practice exam.ID) string { return "cordwalk-" + practice.String() }

type exchange struct {
	Options
	dir    string // the practice's folder
	report Report
	refs   []located // every segment that a head names and whose file is there
	mine   Head
	had    bool     // mine was found
	heads  []string // our own head files
	// renewed is true once this device writes under a new name.
	renewed bool
	// bad holds the names of segments that this device found damaged, and spoilt those that others did and that are.
	bad, spoilt map[[32]byte]bool
	// onto remembers which places are known to lie on which branch.
	onto map[change.Stream]map[uint64]change.Hash
}

type located struct {
	Ref
	path string
	own  bool
}

// Sync exchanges with a folder. What could be done is done even if something fails: the
// report tells what, and Blocked why nothing could be left there. The error is that of reading the
// folder or of this device's own journal.
func Sync(ctx context.Context, folder string, o Options) (Report, error) {
	if o.FS == nil {
		o.FS = disk.OS()
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	if o.Progress == nil {
		o.Progress = func(string, int64, int64) {}
	}
	if e, err := o.FS.Stat(folder); err != nil || !e.Dir {
		if err == nil {
			err = fmt.Errorf("it is a file: %w", fs.ErrInvalid)
		}
		return Report{}, fmt.Errorf("the exchange folder %s is not there (put the stick in, or connect the share): %w", folder, err)
	}
	x := &exchange{Options: o, dir: filepath.Join(folder, FolderName(o.Bag().Practice)), onto: map[change.Stream]map[uint64]change.Hash{}, bad: map[[32]byte]bool{}, spoilt: map[[32]byte]bool{}}
	if err := x.members(); err != nil {
		return x.report, err
	}
	peers, err := x.readHeads(ctx)
	if err != nil {
		return x.report, err
	}
	if err := x.locate(peers); err != nil {
		return x.report, err
	}
	if err := x.take(ctx); err != nil {
		return x.report, err
	}
	if err := x.takeFiles(ctx); err != nil {
		return x.report, err
	}
	if err := x.leave(ctx); err != nil {
		return x.report, err
	}
	return x.report, x.compare(ctx, peers)
}

type peerHead struct {
	Head
	verifier key.Verifier
}

func (x *exchange) problem(format string, args ...any) {
	x.report.Problems = append(x.report.Problems, fmt.Sprintf(format, args...))
}

// list lists a folder; one that is not there is empty.
func (x *exchange) list(name string) ([]disk.Entry, error) {
	es, err := x.FS.List(filepath.Join(x.dir, name))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	return es, err
}

// members learns the statements of the folder and adds ours. Statements are few and small, and
// named after their hash.
func (x *exchange) members() error {
	if x.Members == nil {
		return errors.New("exchanging needs the practice's member list")
	}
	es, err := x.list(membersDir)
	if err != nil {
		return fmt.Errorf("reading the member list in %s: %w", x.dir, err)
	}
	have := map[string]bool{}
	for _, s := range x.Members.Statements() {
		have[statementFile(s)] = true
	}
	there := map[string]bool{}
	var found [][]byte
	for _, e := range es {
		if e.Dir || e.Size > maxStatement || have[e.Name] {
			there[e.Name] = true
			continue
		}
		b, err := disk.ReadFile(x.FS, filepath.Join(x.dir, membersDir, e.Name), maxStatement)
		x.report.Read++
		if err != nil {
			x.problem("the member list's entry %s cannot be read: %s", e.Name, err)
			continue
		}
		if statementFile(b) == e.Name {
			there[e.Name] = true
		}
		found = append(found, b)
	}
	if len(found) > 0 {
		if _, err := x.Members.Learn(found); err != nil {
			return fmt.Errorf("taking in the member list: %w", err)
		}
	}
	if x.ReceiveOnly {
		return nil
	}
	for _, s := range x.Members.Statements() {
		if name := statementFile(s); !there[name] {
			if err := x.put(membersDir, name, s); err != nil {
				x.blocked(err)
				return nil
			}
		}
	}
	return nil
}

// readHeads reads the newest head of each device.
func (x *exchange) readHeads(ctx context.Context) (map[change.Incarnation]peerHead, error) {
	es, err := x.list(headsDir)
	if err != nil {
		return nil, fmt.Errorf("reading the exchange folder %s: %w", x.dir, err)
	}
	// By name first. Files under other names (a copy made by some program) are looked at too:
	// they may be all that is left.
	named := map[change.Incarnation][]uint64{}
	var odd []disk.Entry
	for _, e := range es {
		if d, n, ok := parseHeadFile(e.Name); ok && !e.Dir {
			named[d] = append(named[d], n)
		} else if !e.Dir && e.Size <= maxHead && e.Size > int64(len(headMagic)) && len(odd) < maxOdd && filepath.Ext(e.Name) != ".new" {
			odd = append(odd, e)
		}
	}
	out := map[change.Incarnation]peerHead{}
	read := func(name string) error {
		data, err := disk.ReadFile(x.FS, filepath.Join(x.dir, headsDir, name), maxHead)
		x.report.Read++
		if err != nil {
			return err
		}
		h, v, err := ParseHead(data)
		if err != nil {
			return err
		}
		if h.Practice != x.Bag().Practice {
			return errors.New("it belongs to another practice")
		}
		want, ok := x.Members.Signer(h.Device)
		if !ok || want != v {
			return fmt.Errorf("device %s: %w", h.Device, segment.ErrUnsigned)
		}
		if old, ok := out[h.Device]; !ok || old.Counter < h.Counter {
			out[h.Device] = peerHead{h, v}
		}
		return nil
	}
	for d, counters := range named {
		slices.Sort(counters)
		var first error
		for _, n := range slices.Backward(counters) {
			name := headFile(d, n)
			if d == x.Incarnation() {
				x.heads = append(x.heads, name)
			}
			if _, ok := out[d]; ok {
				continue
			}
			if err := read(name); err != nil && first == nil {
				first = err
			}
		}
		switch _, ok := out[d]; {
		case first == nil:
		case !ok:
			x.problem("what device %s left here cannot be used: %s", d, first)
		case d != x.Incarnation(): // our own is written anew
			x.problem("what device %s left here last cannot be read and may still be on its way; what it left before was used: %s", d, first)
		}
	}
	for _, e := range odd {
		_ = read(e.Name) // a copy that is no good says nothing about the device
	}
	if h, ok := out[x.Incarnation()]; ok {
		mine, err := x.isMine(ctx, h.Head)
		if err != nil {
			return nil, err
		}
		if mine {
			x.mine, x.had = h.Head, true
			delete(out, x.Incarnation())
		}
	}
	return out, nil
}

// isMine reports whether a head in this device's name was left by this very store: what it says
// of the streams that the device writes is part of what the store holds. If not, the store was copied or
// put back to an earlier day, and the head is that of another device.
func (x *exchange) isMine(ctx context.Context, head Head) (bool, error) {
	held, err := x.held(ctx)
	if err != nil {
		return false, err
	}
	for _, r := range head.Streams {
		if r.Device != head.Device {
			continue
		}
		i := slices.IndexFunc(held, func(h Held) bool { return h.Stream == r.Stream() })
		if i < 0 || held[i].Last < r.Last {
			return false, nil
		}
		if held[i].Last == r.Last {
			if held[i].Hash != r.Hash {
				return false, nil
			}
			continue
		}
		hash, ok, err := x.Journal.At(ctx, r.Stream(), r.Last)
		if err != nil {
			return false, fmt.Errorf("%w: %w", errOwnSide, err)
		}
		if !ok || hash != r.Hash {
			return false, nil
		}
	}
	return true, nil
}

// maxBad is how many damaged segments a head names.
const maxBad = 256

// maxOdd is how many files of strange names are looked at in one folder.
const maxOdd = 64

// locate finds the files of the segments that heads name. A segment whose file was renamed is
// found by its trailing hash.
func (x *exchange) locate(peers map[change.Incarnation]peerHead) error {
	es, err := x.list(dataDir)
	if err != nil {
		return fmt.Errorf("reading the exchange folder %s: %w", x.dir, err)
	}
	sizes := map[string]int64{}
	for _, e := range es {
		if !e.Dir {
			sizes[e.Name] = e.Size
		}
	}
	var missing []located
	accused := map[[32]byte]bool{}
	for _, p := range peers {
		for _, name := range p.Bad {
			accused[name] = true
		}
	}
	add := func(r Ref, own bool) {
		l := located{r, filepath.Join(x.dir, dataDir, r.File()), own}
		if accused[r.Name] && sizes[r.File()] == r.Size && !x.sound(r) {
			x.spoilt[r.Name] = true // whoever holds what is in it leaves it again
		}
		if size, ok := sizes[r.File()]; ok && size == r.Size {
			x.refs = append(x.refs, l)
		} else {
			missing = append(missing, l)
		}
	}
	for _, r := range x.mine.Segments {
		add(r, true)
	}
	named := map[string]bool{}
	for _, p := range peers {
		for _, r := range p.Segments {
			add(r, false)
		}
	}
	for _, r := range append(slices.Clone(x.refs), missing...) {
		named[r.File()] = true
	}
	if len(missing) > 0 {
		byTail := map[[32]byte]string{}
		odd := 0
		for name, size := range sizes {
			if named[name] && sizes[name] == size && x.whole(name, size) || size < segment.HeaderSize || size > segment.MaxSize {
				continue
			}
			if odd++; odd > maxOdd {
				break
			}
			if tail, err := x.tail(name, size); err == nil {
				byTail[tail] = name
			}
		}
		for _, m := range missing {
			if name, ok := byTail[m.Name]; ok && sizes[name] == m.Size {
				m.path = filepath.Join(x.dir, dataDir, name)
				x.refs = append(x.refs, m)
			} else {
				x.report.Waiting = append(x.report.Waiting, Waiting{m.Stream(), m.First, m.Last, "its file is not here, or not whole yet"})
			}
		}
	}
	slices.SortFunc(x.refs, func(a, b located) int {
		if c := a.Stream().Compare(b.Stream()); c != 0 {
			return c
		}
		if a.First != b.First {
			return cmpUint(a.First, b.First)
		}
		return -cmpUint(a.Last, b.Last)
	})
	return nil
}

func cmpUint(a, b uint64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// sound reads a segment that another device found damaged, and reports whether it is whole.
func (x *exchange) sound(r Ref) bool {
	x.report.Read++
	data, err := disk.ReadFile(x.FS, filepath.Join(x.dir, dataDir, r.File()), segment.MaxSize)
	if err != nil || len(data) < len(r.Name) {
		return false
	}
	body, tail := data[:len(data)-len(r.Name)], data[len(data)-len(r.Name):]
	return bytes.Equal(tail, r.Name[:]) && sha256.Sum256(body) == r.Name
}

// whole reports whether a file of a segment's name has the size that its head says.
func (x *exchange) whole(name string, size int64) bool {
	for _, r := range x.refs {
		if filepath.Base(r.path) == name {
			return r.Size == size
		}
	}
	return false
}

// tail reads a file's last 32 bytes.
func (x *exchange) tail(name string, size int64) (t [32]byte, err error) {
	f, err := x.FS.Open(filepath.Join(x.dir, dataDir, name))
	if err != nil {
		return t, err
	}
	defer f.Close()
	x.report.Read++
	if n, err := f.ReadAt(t[:], size-32); n < 32 {
		return t, err
	}
	return t, nil
}

// take reads what we lack.
func (x *exchange) take(ctx context.Context) error {
	held, err := x.held(ctx)
	if err != nil {
		return err
	}
	var todo []located
	var total, done int64
	for _, r := range x.refs {
		ok, err := x.covered(ctx, held, r.Ref)
		if err != nil {
			return err
		}
		if !ok {
			todo = append(todo, r)
			total += r.Size
		}
	}
	ahead := x.openAhead(todo)
	defer ahead.stop()
	for i, r := range todo {
		if err := ctx.Err(); err != nil {
			return err
		}
		if ok, err := x.covered(ctx, held, r.Ref); ok || err != nil {
			if err != nil {
				return err
			}
			continue
		}
		s := r.Stream()
		if s.Device == x.Incarnation() {
			// Somebody wrote in this device's name: its store was copied, or put back to an
			// earlier day. What lies here is kept; this device goes on under a new name.
			if err := x.Journal.Renew(ctx); err != nil {
				return fmt.Errorf("beginning anew under another name: %w", err)
			}
			x.problem("this device's records were also continued elsewhere (a copied or restored store); both are kept, and this device goes on under a new name")
			x.renewed = true
			// The old name's heads are no longer ours to replace.
			x.mine, x.had, x.heads = Head{}, false, nil
			for i := range x.refs {
				x.refs[i].own = false
			}
			if held, err = x.held(ctx); err != nil {
				return err
			}
		}
		want, ok := x.Members.Signer(s.Device)
		if !ok {
			x.problem("a segment of a device that is not a member was left alone: %s", s.Device)
			continue
		}
		if err := x.read(ctx, r, func() (*segment.Reader, error) { return ahead.open(i) }, held, want); err != nil {
			if errors.Is(err, errOwnSide) || ctx.Err() != nil {
				return err
			}
			x.report.Waiting = append(x.report.Waiting, Waiting{s, r.First, r.Last, err.Error()})
			if !errors.Is(err, change.ErrNoKey) && !errors.Is(err, change.ErrNewer) && len(x.bad) < maxBad {
				x.bad[r.Name] = true
			}
			continue
		}
		done += r.Size
		x.Progress("receiving", done, total)
		if held, err = x.held(ctx); err != nil {
			return err
		}
	}
	return nil
}

// aheadReader opens segments before it is their turn, as many at once as there are processors to do it.
type aheadReader struct {
	x     *exchange
	todo  []located
	ready map[int]chan opening
	next  int
}

type opening struct {
	rd  *segment.Reader
	err error
}

const openAtOnce = 3

func (x *exchange) openAhead(todo []located) *aheadReader {
	return &aheadReader{x: x, todo: todo, ready: map[int]chan opening{}}
}

// open returns the i-th segment, being read.
func (a *aheadReader) open(i int) (*segment.Reader, error) {
	for k := range a.ready {
		if k < i { // it turned out not to be needed
			a.drop(k)
		}
	}
	for a.next = max(a.next, i); a.next < len(a.todo) && a.next < i+openAtOnce; a.next++ {
		c := make(chan opening, 1)
		a.ready[a.next] = c
		path := a.todo[a.next].path
		go func() {
			rd, err := a.x.openSegment(path)
			c <- opening{rd, err}
		}()
	}
	o := <-a.ready[i]
	delete(a.ready, i)
	return o.rd, o.err
}

func (a *aheadReader) drop(k int) {
	if o := <-a.ready[k]; o.rd != nil {
		o.rd.Stop()
	}
	delete(a.ready, k)
}

func (a *aheadReader) stop() {
	for k := range a.ready {
		a.drop(k)
	}
}

// openSegment reads a segment's file, which is small where it is compressed, and begins to open it.
func (x *exchange) openSegment(path string) (*segment.Reader, error) {
	data, err := disk.ReadFile(x.FS, path, segment.MaxSize)
	if err != nil {
		return nil, err
	}
	rd, err := segment.NewReader(bytes.NewReader(data), x.Bag().Ring)
	if err != nil {
		return nil, err
	}
	rd.Ahead()
	return rd, nil
}

// errOwnSide marks errors of this device's own journal: to go on makes no sense.
var errOwnSide = errors.New("this device's journal")

func (x *exchange) held(ctx context.Context) ([]Held, error) {
	held, err := x.Journal.Streams(ctx)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", errOwnSide, err)
	}
	return held, nil
}

// covered reports whether we hold all of a segment, on its own branch.
func (x *exchange) covered(ctx context.Context, held []Held, r Ref) (bool, error) {
	for _, h := range held {
		if h.Of != r.Stream() {
			continue
		}
		if ok, err := x.holds(ctx, h, r); ok || err != nil {
			return ok, err
		}
	}
	return false, nil
}

// holds reports whether what we hold of a stream or branch contains a segment.
func (x *exchange) holds(ctx context.Context, h Held, r Ref) (bool, error) {
	inside := false
	for _, sp := range h.Spans {
		// The second branch of a fork is held from where it differs.
		inside = inside || r.Last <= sp.Last && (sp.First <= r.First || h.Stream != h.Of && sp.First <= r.Last)
	}
	if !inside {
		return false, nil
	}
	if r.Last == h.Last {
		return r.Hash == h.Hash, nil
	}
	m := x.onto[h.Stream]
	if m == nil {
		m = map[uint64]change.Hash{}
		x.onto[h.Stream] = m
		signed, err := x.Journal.Signed(ctx, h.Stream)
		if err != nil {
			return false, fmt.Errorf("%w: %w", errOwnSide, err)
		}
		for _, s := range signed {
			m[s.Last] = s.Hash
		}
		if h.Own {
			for _, mine := range x.mine.Segments {
				if mine.Stream() == h.Stream {
					m[mine.Last] = mine.Hash
				}
			}
		}
	}
	if hash, ok := m[r.Last]; ok {
		return hash == r.Hash, nil
	}
	hash, ok, err := x.Journal.At(ctx, h.Stream, r.Last)
	if err != nil {
		return false, fmt.Errorf("%w: %w", errOwnSide, err)
	}
	if ok {
		m[r.Last] = hash
	}
	return ok && hash == r.Hash, nil
}

// read takes one segment in.
func (x *exchange) read(ctx context.Context, r located, opened func() (*segment.Reader, error), held []Held, want key.Verifier) error {
	rd, err := opened()
	if err != nil {
		return err
	}
	defer rd.Stop()
	x.report.Read++
	if rd.Stream != r.Stream() || rd.First != r.First || rd.Signed.Hash != r.Hash {
		return fmt.Errorf("%w: the segment is not the one that its device names", change.ErrMalformed)
	}
	if rd.Verifier != want {
		return fmt.Errorf("the segment: %w", segment.ErrUnsigned)
	}
	received, forks, err := TakeSegment(ctx, x.Journal, rd, held)
	if err == nil {
		x.report.Received += received
	}
	x.report.Forks = append(x.report.Forks, forks...)
	x.onto = map[change.Stream]map[uint64]change.Hash{}
	return err
}

// TakeSegment takes in of a segment what the journal does not hold, for good. held is what it holds now. That the
// segment's signer may sign for its stream, and that the stream is not the one this device writes,
// is for the caller to see to. An error that wraps none of the journal's leaves what came before it, which
// is true and follows what was held.
func TakeSegment(ctx context.Context, j Journal, rd *segment.Reader, held []Held) (received int, forks []Fork, err error) {
	var t Taken
	if err := t.Take(ctx, j, rd, held); err != nil {
		return t.Frames, t.Forks, err
	}
	return t.Frames, t.Forks, t.Commit(ctx, j)
}

// Taken is what was taken in of segments and is not durable before Commit. Many small segments are made durable
// together. The zero value is ready for use.
type Taken struct {
	Frames int
	Forks  []Fork
	heads  []takenHead
}

type takenHead struct {
	as   change.Stream
	head *segment.Signed
}

// Take is TakeSegment without making it durable. After an error Commit keeps what came before it.
func (t *Taken) Take(ctx context.Context, j Journal, rd *segment.Reader, held []Held) error {
	b, err := branch(ctx, j, rd.Header, held)
	if err != nil {
		return err
	}
	used := map[change.Stream]bool{}
	defer func() {
		for as := range used {
			t.heads = append(t.heads, takenHead{as: as})
		}
	}()
	for {
		block, err := rd.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return err
		}
		if err := ctx.Err(); err != nil {
			return err
		}
		parts, err := b.split(block)
		if err != nil {
			return err
		}
		for _, part := range parts {
			used[part.as] = true
			if part.fork {
				t.Forks = append(t.Forks, Fork{rd.Stream, part.block.Frames[0].First, part.as})
			}
			if err := j.Receive(ctx, part.as, part.block); err != nil {
				return fmt.Errorf("%w: %w", errOwnSide, err)
			}
			t.Frames += len(part.block.Frames)
		}
		segment.Recycle(block)
	}
	delete(used, b.as)
	t.heads = append(t.heads, takenHead{b.as, &rd.Signed})
	return nil
}

// Commit makes durable what was taken in.
func (t *Taken) Commit(ctx context.Context, j Journal) error {
	for len(t.heads) > 0 {
		if err := j.Commit(ctx, t.heads[0].as, t.heads[0].head); err != nil {
			return fmt.Errorf("%w: %w", errOwnSide, err)
		}
		t.heads = t.heads[1:]
	}
	return nil
}

// OwnSide reports whether an error is that of this device's own journal.
func OwnSide(err error) bool { return errors.Is(err, errOwnSide) }

// brancher tells, frame by frame, on which branch of a stream a segment goes on.
type brancher struct {
	ctx   context.Context
	j     Journal
	held  []Held
	first uint64 // of the segment
	last  uint64
	as    change.Stream
	ours  map[uint64]change.Hash // what we hold under as: hash of the frame that begins at this number
	end   uint64                 // the highest number that we hold under as
	head  change.Hash            // there
}

// branch looks at what we hold of a segment's stream, and on which branch the segment begins: on that which
// holds the frame before it.
func branch(ctx context.Context, j Journal, sh segment.Header, held []Held) (*brancher, error) {
	b := &brancher{ctx: ctx, j: j, held: held, first: sh.First, last: sh.Last}
	as := sh.Stream
	for _, h := range held {
		if h.Of != sh.Stream {
			continue
		}
		if h.Last+1 == sh.First && h.Hash == sh.Prev {
			as = h.Stream
			break
		}
		if sh.First == 1 || h.Last < sh.First {
			continue
		}
		hash, ok, err := j.At(ctx, h.Stream, sh.First-1)
		if err != nil {
			return nil, fmt.Errorf("%w: %w", errOwnSide, err)
		}
		if ok && hash == sh.Prev {
			as = h.Stream
			break
		}
	}
	return b, b.onto(as)
}

// onto goes on under a name.
func (b *brancher) onto(as change.Stream) error {
	b.as, b.ours, b.end, b.head = as, map[uint64]change.Hash{}, 0, change.Hash{}
	i := slices.IndexFunc(b.held, func(h Held) bool { return h.Stream == as })
	if i < 0 {
		return nil
	}
	b.end, b.head = b.held[i].Last, b.held[i].Hash
	if b.end < b.first {
		return nil
	}
	err := b.j.Frames(b.ctx, as, b.first, func(f change.Frame) error {
		if f.First > b.last {
			return errEnough
		}
		b.ours[f.First] = f.Hash()
		return nil
	})
	if err != nil && !errors.Is(err, errEnough) {
		return fmt.Errorf("%w: %w", errOwnSide, err)
	}
	return nil
}

type part struct {
	as    change.Stream
	block segment.Block
	fork  bool
}

// split leaves out of a block what we hold, and parts it where it begins to differ.
func (b *brancher) split(block segment.Block) (parts []part, err error) {
	n := len(block.Frames)
	if n == 0 {
		return nil, nil
	}
	// The usual case: all is new and goes on where we stand. The reader saw to it that each frame follows the
	// one before it.
	if first := block.Frames[0]; len(b.ours) == 0 && (b.end == 0 || first.First == b.end+1 && first.Prev == b.head) {
		b.end, b.head = block.Frames[n-1].Last, block.Hashes[n-1]
		return []part{{as: b.as, block: block}}, nil
	}
	for i, f := range block.Frames {
		fork, skip := false, false
		for {
			ours, have := b.ours[f.First]
			if have && ours == block.Hashes[i] {
				skip = true
				break
			}
			// It differs where we hold another frame, or where it follows another one than our last.
			if !have && (f.First != b.end+1 || f.Prev == b.head || b.end == 0) {
				break
			}
			as := segment.ForkOf(f.Stream, block.Hashes[i])
			fork = !slices.ContainsFunc(b.held, func(h Held) bool { return h.Stream == as })
			if err := b.onto(as); err != nil {
				return nil, err
			}
			if fork {
				break
			}
		}
		if skip {
			continue
		}
		if f.First == b.end+1 || b.end == 0 {
			b.end, b.head = f.Last, block.Hashes[i]
		}
		if n := len(parts); n == 0 || parts[n-1].as != b.as {
			parts = append(parts, part{as: b.as, fork: fork})
		}
		p := &parts[len(parts)-1].block
		p.Raw = append(p.Raw, f.Raw...)
		p.Frames = append(p.Frames, f)
		p.Plain = append(p.Plain, block.Plain[i])
		p.Hashes = append(p.Hashes, block.Hashes[i])
	}
	if len(parts) == 1 && len(parts[0].block.Frames) == len(block.Frames) {
		parts[0].block = block
	}
	return parts, nil
}

// compare says of each peer what it lacks and whether its state is ours.
func (x *exchange) compare(ctx context.Context, peers map[change.Incarnation]peerHead) error {
	held, err := x.Journal.Streams(ctx)
	if err != nil {
		return fmt.Errorf("reading this device's journal: %w", err)
	}
	sums, err := x.Journal.Sums(ctx)
	if err != nil {
		return fmt.Errorf("reading this device's state: %w", err)
	}
	now := x.Now()
	for d, p := range peers {
		peer := Peer{Device: d, Verifier: p.verifier, Time: p.Time, Ahead: p.Time.Ahead(now)}
		reach := map[change.Stream]uint64{}
		for _, r := range p.Streams {
			reach[r.Stream()] = r.Last
		}
		for _, h := range held {
			if n := reach[h.Stream]; h.Last > n {
				peer.Lacks += h.Last - n
			}
		}
		for _, mine := range sums {
			for _, theirs := range p.Sums {
				if theirs.Site == mine.Site && theirs.Rules == mine.Rules && theirs.At == mine.At && theirs.Sum != mine.Sum {
					peer.Differs = true
				}
			}
		}
		if peer.Differs {
			x.problem("device %s holds the same entries as this device and yet shows something else: one of the two has a fault; run check on both", d)
		}
		x.report.Peers = append(x.report.Peers, peer)
	}
	slices.SortFunc(x.report.Peers, func(a, b Peer) int { return slices.Compare(a.Device[:], b.Device[:]) })
	return nil
}

// blocked notes why nothing can be left in the folder.
func (x *exchange) blocked(err error) {
	if x.report.Blocked != nil {
		return
	}
	why := "it cannot be written"
	switch {
	case errors.Is(err, fs.ErrPermission), isReadOnly(err):
		why = "it is read-only; open its write protection"
	case isFull(err):
		why = "it is full; make room there"
	case errors.Is(err, fs.ErrNotExist):
		why = "it has gone away; put the stick in, or connect the share"
	}
	x.report.Blocked = fmt.Errorf("nothing could be left in the exchange folder: %s: %w", why, err)
}

// put writes a file in a folder of the practice's folder, making the folder if need be, and reads it back.
func (x *exchange) put(dir, name string, data []byte) error {
	if !disk.GoodName(name) {
		return fmt.Errorf("%w: file name %q", fs.ErrInvalid, name)
	}
	if err := x.makeDirs(dir); err != nil {
		return err
	}
	path := filepath.Join(x.dir, dir, name)
	if err := disk.Replace(x.FS, path, data); err != nil {
		_ = x.FS.Remove(disk.Temporary(path))
		return err
	}
	back, err := disk.ReadFile(x.FS, path, int64(len(data)))
	if err != nil {
		return err
	}
	if !slices.Equal(back, data) {
		_ = x.FS.Remove(path)
		return fmt.Errorf("%s reads back differently from what was written: the stick or share is faulty", name)
	}
	return nil
}

func (x *exchange) makeDirs(dir string) error {
	if err := x.FS.MakeDir(x.dir); err != nil {
		return err
	}
	return x.FS.MakeDir(filepath.Join(x.dir, dir))
}
