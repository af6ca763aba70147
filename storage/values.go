package storage

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strconv"
	"time"

	"github.com/fxamacker/cbor/v2"

	"cordwalk.example/cordwalk/exam"
)

// A value is one byte, the version of its encoding, followed by deterministic CBOR: a text,
// a number, a flag, or a map with whole numbers as keys. Keys are never used again for
// something else; a newer minor version may only add keys, which older programs ignore and
// keep, since they keep the value's bytes. A value of a newer major version is kept, passed
// on and not shown.
const valueVersion = 1

// errNewerValue means that a value was written by a newer major version of this program.
var errNewerValue = errors.New("written by a newer version of this program")

var (
	valueEnc = func() cbor.EncMode {
		m, err := cbor.CoreDetEncOptions().EncMode()
		if err != nil {
			panic(err) // a mistake in the options, found by any test
		}
		return m
	}()
	valueDec = func() cbor.DecMode {
		m, err := cbor.DecOptions{
			DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden,
			MaxNestedLevels: 8, MaxArrayElements: 4096, MaxMapPairs: 64, UTF8: cbor.UTF8RejectInvalid,
		}.DecMode()
		if err != nil {
			panic(err)
		}
		return m
	}()
)

func pack(v any) []byte {
	b, err := valueEnc.Marshal(v)
	if err != nil {
		panic("storage: a value has no encoding: " + err.Error()) // a mistake in a struct below
	}
	return append([]byte{valueVersion}, b...)
}

func unpack(b []byte, v any) error {
	if len(b) == 0 {
		return errors.New("the value is empty")
	}
	if b[0] > valueVersion {
		return errNewerValue
	}
	if b[0] < valueVersion {
		return fmt.Errorf("value of version %d", b[0])
	}
	return valueDec.Unmarshal(b[1:], v)
}

// The wire forms. Enumerations are words, so that their numbers in package exam may change.

type wireContact struct {
	Name    string `cbor:"1,keyasint,omitempty"`
	Phone   string `cbor:"2,keyasint,omitempty"`
	Email   string `cbor:"3,keyasint,omitempty"`
	Address string `cbor:"4,keyasint,omitempty"`
}

type wireReferral struct {
	By     string    `cbor:"1,keyasint,omitempty"`
	Until  exam.Date `cbor:"2,keyasint,omitempty"`
	Limits string    `cbor:"3,keyasint,omitempty"`
}

type wireStatus struct {
	Status string    `cbor:"1,keyasint"`
	Since  exam.Date `cbor:"2,keyasint,omitempty"`
}

type wireProblem struct {
	Diagnosis string    `cbor:"1,keyasint"`
	Level     string    `cbor:"2,keyasint,omitempty"`
	Side      string    `cbor:"3,keyasint,omitempty"`
	Onset     exam.Date `cbor:"4,keyasint,omitempty"`
	Surgery   exam.Date `cbor:"5,keyasint,omitempty"`
	Resolved  exam.Date `cbor:"6,keyasint,omitempty"`
	Note      string    `cbor:"7,keyasint,omitempty"`
}

type wirePrecaution struct {
	Code  string    `cbor:"1,keyasint"`
	Site  string    `cbor:"2,keyasint,omitempty"`
	Since exam.Date `cbor:"3,keyasint,omitempty"`
	Until exam.Date `cbor:"4,keyasint,omitempty"`
	Note  string    `cbor:"5,keyasint,omitempty"`
}

type wireGoal struct {
	Words   string    `cbor:"1,keyasint"`
	Measure string    `cbor:"2,keyasint,omitempty"`
	Item    string    `cbor:"3,keyasint,omitempty"`
	Site    string    `cbor:"4,keyasint,omitempty"`
	Target  float64   `cbor:"5,keyasint"`
	By      exam.Date `cbor:"6,keyasint,omitempty"`
	Reached exam.Date `cbor:"7,keyasint,omitempty"`
}

type wireMedicine struct {
	Name  string    `cbor:"1,keyasint"`
	Dose  string    `cbor:"2,keyasint,omitempty"`
	Start exam.Date `cbor:"3,keyasint,omitempty"`
	Stop  exam.Date `cbor:"4,keyasint,omitempty"`
}

type wireExamined struct {
	Second int64  `cbor:"1,keyasint"`           // since 1970
	Nano   int    `cbor:"2,keyasint,omitempty"` // within the second
	Offset int    `cbor:"3,keyasint"`           // seconds east of UTC
	Zone   string `cbor:"4,keyasint,omitempty"` // IANA
}

type wireClosed struct {
	At wireExamined `cbor:"1,keyasint"`
}

type wireTreatment struct {
	Kind     string  `cbor:"1,keyasint"`
	Site     string  `cbor:"2,keyasint,omitempty"`
	Params   string  `cbor:"3,keyasint,omitempty"`
	Minutes  float64 `cbor:"4,keyasint,omitempty"`
	Override string  `cbor:"5,keyasint,omitempty"`
}

type wireHome struct {
	Kind     string `cbor:"1,keyasint"`
	How      string `cbor:"2,keyasint,omitempty"`
	Times    int    `cbor:"3,keyasint,omitempty"`
	DaysWeek int    `cbor:"4,keyasint,omitempty"`
	Amount   string `cbor:"5,keyasint,omitempty"`
	StopFor  string `cbor:"6,keyasint,omitempty"`
	Override string `cbor:"7,keyasint,omitempty"`
}

type wireAttachment struct {
	Name   string `cbor:"1,keyasint"`
	Format string `cbor:"2,keyasint"`
	Size   int64  `cbor:"3,keyasint"`
	Note   string `cbor:"4,keyasint,omitempty"`
}

type wireStim struct {
	Kind string `cbor:"1,keyasint"`
	Data string `cbor:"2,keyasint"`
}

type wireReport struct {
	Falls         string `cbor:"1,keyasint,omitempty"`
	Urine         string `cbor:"2,keyasint,omitempty"`
	Appetite      string `cbor:"3,keyasint,omitempty"`
	ExercisesDone int    `cbor:"4,keyasint,omitempty"`
	ExercisesSet  int    `cbor:"5,keyasint,omitempty"`
	Words         string `cbor:"6,keyasint,omitempty"`
}

type wireDose struct {
	Medicine string  `cbor:"1,keyasint"`
	Hours    float64 `cbor:"2,keyasint"`
}

type wireAnswer struct {
	Rule     string       `cbor:"1,keyasint"`
	Told     string       `cbor:"2,keyasint,omitempty"`
	Note     string       `cbor:"3,keyasint,omitempty"`
	Examiner string       `cbor:"4,keyasint,omitempty"`
	At       wireExamined `cbor:"5,keyasint"`
}

type wireExaminer struct {
	Name     string `cbor:"1,keyasint"`
	Initials string `cbor:"2,keyasint,omitempty"`
	PINHash  string `cbor:"3,keyasint,omitempty"`
}

type wireProtocol struct {
	Name  string   `cbor:"1,keyasint"`
	Items []string `cbor:"2,keyasint,omitempty"`
}

type wireSent struct {
	Visit    []byte       `cbor:"1,keyasint"`
	At       wireExamined `cbor:"2,keyasint"`
	Kind     string       `cbor:"3,keyasint"`
	Examiner string       `cbor:"4,keyasint,omitempty"`
	Language string       `cbor:"5,keyasint,omitempty"`
	Summary  string       `cbor:"6,keyasint,omitempty"`
	Reworded bool         `cbor:"7,keyasint,omitempty"`
	Hash     string       `cbor:"8,keyasint,omitempty"`
	Note     string       `cbor:"9,keyasint,omitempty"`
}

type wireMeasure struct {
	Value    float64 `cbor:"1,keyasint"`
	Position string  `cbor:"2,keyasint,omitempty"`
	Clipped  bool    `cbor:"3,keyasint,omitempty"`
	EndFeel  string  `cbor:"4,keyasint,omitempty"`
	Variant  string  `cbor:"5,keyasint,omitempty"`
	BestEnd  float64 `cbor:"6,keyasint,omitempty"`
	Note     string  `cbor:"7,keyasint,omitempty"`
}

func encodeText(s string) []byte {
	if s == "" {
		return nil
	}
	return pack(s)
}

func decodeText(b []byte) (s string, err error) { err = unpack(b, &s); return s, err }

// encodeFlag stores true; false clears the field.
func encodeFlag(on bool) []byte {
	if !on {
		return nil
	}
	return pack(true)
}

func decodeFlag(b []byte) (on bool, err error) { err = unpack(b, &on); return on, err }

// encodeRaw stores bytes as they are; none clear the field.
func encodeRaw(b []byte) []byte {
	if len(b) == 0 {
		return nil
	}
	return pack(b)
}

func decodeRaw(b []byte) (raw []byte, err error) { err = unpack(b, &raw); return raw, err }

func encodeNumber(n int64) []byte {
	if n == 0 {
		return nil
	}
	return pack(n)
}

func decodeNumber(b []byte) (n int64, err error) { err = unpack(b, &n); return n, err }

// encodeValue encodes the structs of package exam that are stored whole.
func encodeValue(v any) []byte {
	switch x := v.(type) {
	case exam.Contact:
		return pack(wireContact(x))
	case exam.Referral:
		return pack(wireReferral(x))
	case wireStatus:
		return pack(x)
	case exam.Problem:
		return pack(wireProblem{x.Diagnosis, x.Level, x.Side, x.Onset, x.Surgery, x.Resolved, x.Note})
	case exam.PrecautionOn:
		return pack(wirePrecaution{x.Code, x.Site, x.Since, x.Until, x.Note})
	case exam.Goal:
		return pack(wireGoal{x.Words, x.Measure, x.Item, x.Site, x.Target, x.By, x.Reached})
	case exam.Medicine:
		return pack(wireMedicine{x.Name, x.Dose, x.Start, x.Stop})
	case exam.Treatment:
		return pack(wireTreatment{x.Kind, x.Site, x.Params, x.Minutes, x.Override})
	case exam.HomeExercise:
		return pack(wireHome{x.Kind, x.How, x.Times, x.DaysWeek, x.Amount, x.StopFor, x.Override})
	case exam.Attachment:
		return pack(wireAttachment{x.Name, x.Format, x.Size, x.Note})
	case exam.StimRecord:
		return pack(wireStim{x.Kind, x.Data})
	case exam.OwnerReport:
		return pack(wireReport(x))
	case exam.Examiner:
		return pack(wireExaminer{x.Name, x.Initials, x.PINHash})
	case exam.Protocol:
		return pack(wireProtocol{x.Name, x.Items})
	case []exam.DoseGiven:
		w := make([]wireDose, len(x))
		for i, d := range x {
			w[i] = wireDose(d)
		}
		return pack(w)
	}
	panic(fmt.Sprintf("storage: no encoding for %T", v))
}

func encodeExamined(t time.Time, zone string) []byte {
	if t.IsZero() {
		return nil
	}
	return pack(wireTime(t, zone))
}

func wireTime(t time.Time, zone string) wireExamined {
	return wireExamined{Second: t.Unix(), Nano: t.Nanosecond(), Offset: offset(t), Zone: zone}
}

// offset returns the seconds east of UTC that t was recorded in.
func offset(t time.Time) int { _, o := t.Zone(); return o }

func (w wireExamined) time() time.Time {
	if w.Offset == 0 {
		return time.Unix(w.Second, int64(w.Nano)).UTC()
	}
	return time.Unix(w.Second, int64(w.Nano)).In(zoneOf(w.Offset))
}

// zoneOf returns the zone of a fixed offset, named by it: "+01:00".
func zoneOf(seconds int) *time.Location {
	sign, s := "+", seconds
	if s < 0 {
		sign, s = "-", -s
	}
	return time.FixedZone(fmt.Sprintf("%s%02d:%02d", sign, s/3600, s/60%60), seconds)
}

func encodeClosed(at time.Time) []byte { return pack(wireClosed{wireTime(at, "")}) }

func encodeAnswer(a exam.Acknowledgement) []byte {
	return pack(wireAnswer{a.Rule, a.Told, a.Note, a.Examiner, wireTime(a.At, "")})
}

func encodeSent(x exam.Sent) []byte {
	return pack(wireSent{x.Visit[:], wireTime(x.At, ""), x.Kind, x.Examiner, x.Language, x.Summary, x.Reworded, x.Hash, x.Note})
}

// decodeSent reads a paper that was sent; its id stands in the field's name.
func decodeSent(id exam.ID, b []byte) (exam.Sent, error) {
	var w wireSent
	if err := unpack(b, &w); err != nil {
		return exam.Sent{}, err
	}
	x := exam.Sent{ID: id, At: w.At.time(), Kind: w.Kind, Examiner: w.Examiner, Language: w.Language, Summary: w.Summary, Reworded: w.Reworded, Hash: w.Hash, Note: w.Note}
	if len(w.Visit) != len(x.Visit) {
		return exam.Sent{}, fmt.Errorf("a paper that was sent names no visit")
	}
	x.Visit = exam.ID(w.Visit)
	return x, nil
}

func encodeMeasure(m exam.Measured) []byte {
	return pack(wireMeasure{m.Value, m.Position, m.Clipped, m.EndFeel, m.Variant, m.BestEnd, m.Note})
}

// decodeMeasure reads a measured value; its cell stands in the field's name.
func decodeMeasure(cell string, b []byte) (exam.Measured, error) {
	var w wireMeasure
	if err := unpack(b, &w); err != nil {
		return exam.Measured{}, err
	}
	m, err := parseMeasureCell(cell)
	m.Value, m.Position, m.Clipped, m.EndFeel, m.Variant, m.BestEnd, m.Note = w.Value, w.Position, w.Clipped, w.EndFeel, w.Variant, w.BestEnd, w.Note
	return m, err
}

// parseMeasureCell is the inverse of exam.Measured.Key.
func parseMeasureCell(cell string) (m exam.Measured, err error) {
	parts := splitCell(cell)
	if len(parts) < 2 {
		return m, fmt.Errorf("%q names no measure and site", cell)
	}
	if m.Measure, err = exam.ParseMeasure(parts[0]); err != nil {
		return m, err
	}
	if parts[1] != "" {
		if m.Site, err = exam.ParseSite(parts[1]); err != nil {
			return m, err
		}
	}
	for _, p := range parts[2:] {
		if j, jerr := exam.ParseJoint(p); jerr == nil && j != exam.NoJoint {
			m.Joint = j
		} else if at, ferr := strconv.ParseFloat(p, 64); ferr == nil && !math.IsNaN(at) {
			m.At = at
		} else {
			m.Motion = p
		}
	}
	if m.Key() != cell {
		return m, fmt.Errorf("%q is no cell of a measure", cell)
	}
	return m, nil
}

func splitCell(cell string) []string {
	var parts []string
	for start, i := 0, 0; ; i++ {
		if i == len(cell) || cell[i] == '/' {
			parts = append(parts, cell[start:i])
			if i == len(cell) {
				return parts
			}
			start = i + 1
		}
	}
}

// Findings are read by the ten thousand, so their map is written and read by hand. It is the
// same deterministic CBOR: rising keys, shortest forms.
const (
	findingGrade  = 1 // whole number; absent: not tested
	findingReason = 2 // text
	findingLevel  = 3 // text
	findingSide   = 4 // text
	findingHow    = 5 // see howNumber and howOf; absent: examined
	findingSeen   = 6 // true
	findingBlock  = 7 // text
	findingNote   = 8 // text
)

// howNumber is written down here, so that package exam may order its constants anew.
func howNumber(h exam.How) byte {
	switch h {
	case exam.SameAsLast:
		return 1
	case exam.RestNormal:
		return 2
	}
	return 0
}

func encodeFinding(f exam.Finding) []byte {
	b := make([]byte, 2, 16)
	b[0] = valueVersion
	pairs := 0
	if g, ok := f.Result.Grade(); ok {
		pairs++
		b = append(b, findingGrade)
		if g >= 0 {
			b = appendHead(b, 0, uint64(g))
		} else {
			b = appendHead(b, 0x20, uint64(-1-int(g)))
		}
	}
	text := func(key byte, s string) {
		if s != "" {
			pairs++
			b = append(b, key)
			b = appendHead(b, 0x60, uint64(len(s)))
			b = append(b, s...)
		}
	}
	if !f.Result.Tested() {
		text(findingReason, f.Result.Reason().String())
	}
	text(findingLevel, f.Level.String())
	text(findingSide, f.Side.String())
	if n := howNumber(f.How); n != 0 {
		pairs++
		b = append(b, findingHow, n)
	}
	if f.Seen {
		pairs++
		b = append(b, findingSeen, 0xf5)
	}
	text(findingBlock, f.Block)
	text(findingNote, f.Note)
	b[1] = 0xa0 | byte(pairs)
	return b
}

// appendHead writes the head of a CBOR item of a major type in its shortest form.
func appendHead(b []byte, major byte, n uint64) []byte {
	switch {
	case n < 24:
		return append(b, major|byte(n))
	case n < 1<<8:
		return append(b, major|24, byte(n))
	case n < 1<<16:
		return binary.BigEndian.AppendUint16(append(b, major|25), uint16(n))
	case n < 1<<32:
		return binary.BigEndian.AppendUint32(append(b, major|26), uint32(n))
	}
	return binary.BigEndian.AppendUint64(append(b, major|27), n)
}

// readHead reads the head of a CBOR item.
func readHead(b []byte) (major byte, n uint64, rest []byte, ok bool) {
	if len(b) == 0 {
		return 0, 0, nil, false
	}
	major, info := b[0]&0xe0, b[0]&0x1f
	b = b[1:]
	switch {
	case info < 24:
		return major, uint64(info), b, true
	case info == 24 && len(b) >= 1:
		return major, uint64(b[0]), b[1:], true
	case info == 25 && len(b) >= 2:
		return major, uint64(binary.BigEndian.Uint16(b)), b[2:], true
	case info == 26 && len(b) >= 4:
		return major, uint64(binary.BigEndian.Uint32(b)), b[4:], true
	case info == 27 && len(b) >= 8:
		return major, binary.BigEndian.Uint64(b), b[8:], true
	}
	return 0, 0, nil, false
}

// decodeFinding reads a finding of the cell k.
func decodeFinding(k exam.Key, b []byte) (exam.Finding, error) {
	f := exam.Finding{Item: k.Item, Site: k.Site, Digit: k.Digit, Joint: k.Joint}
	if len(b) < 2 {
		return f, errors.New("a finding is cut off")
	}
	if b[0] > valueVersion {
		return f, errNewerValue
	}
	major, pairs, rest, ok := readHead(b[1:])
	if !ok || major != 0xa0 || b[0] != valueVersion {
		return f, errors.New("a finding is no map")
	}
	var grade int8
	tested, reason := false, exam.ReasonNone
	for ; pairs > 0; pairs-- {
		kmajor, key, after, ok := readHead(rest)
		if !ok || kmajor != 0 {
			return f, errors.New("a finding has a key that is no number")
		}
		if key > findingNote {
			return finish(f, grade, tested, reason), nil // of a newer minor version: ignored here, kept in the value
		}
		major, n, body, ok := readHead(after)
		if !ok {
			return f, errors.New("a finding is cut off")
		}
		var text string
		if major == 0x60 {
			if uint64(len(body)) < n {
				return f, errors.New("a finding is cut off")
			}
			text, body = string(body[:n]), body[n:]
		}
		var err error
		switch {
		case key == findingGrade && major == 0 && n <= 127:
			grade, tested = int8(n), true
		case key == findingGrade && major == 0x20 && n <= 127:
			grade, tested = int8(-1-int(n)), true
		case key == findingReason && major == 0x60:
			reason, _ = exam.ParseReason(text)
		case key == findingLevel && major == 0x60:
			f.Level, err = exam.ParseVertebra(text, 0)
		case key == findingSide && major == 0x60:
			f.Side, err = exam.ParseSite(text)
		case key == findingHow && major == 0:
			f.How = howOf(n)
		case key == findingSeen && major == 0xe0:
			f.Seen = n == 21
		case key == findingBlock && major == 0x60:
			f.Block = text
		case key == findingNote && major == 0x60:
			f.Note = text
		default:
			return f, fmt.Errorf("a finding has a value of the wrong kind under key %d", key)
		}
		if err != nil {
			return f, err
		}
		rest = body
	}
	return finish(f, grade, tested, reason), nil
}

func finish(f exam.Finding, grade int8, tested bool, reason exam.Reason) exam.Finding {
	if tested {
		f.Result = exam.Graded(grade)
	} else {
		f.Result = exam.Untested(reason)
	}
	return f
}

func howOf(n uint64) exam.How {
	switch n {
	case 1:
		return exam.SameAsLast
	case 2:
		return exam.RestNormal
	}
	return exam.Examined
}

// The zero of an enumeration is stored as no value at all.

func speciesWord(s exam.Species) string {
	if s == 0 {
		return ""
	}
	return s.String()
}

func sexWord(s exam.Sex) string {
	if s == exam.SexUnknown {
		return ""
	}
	return s.String()
}

func sedationWord(s exam.Sedation) string {
	if s == exam.SedationNone {
		return ""
	}
	return s.String()
}

func statusOf(p exam.Patient) wireStatus {
	if p.Status == exam.Active && p.StatusSince == "" {
		return wireStatus{}
	}
	return wireStatus{p.Status.String(), p.StatusSince}
}
