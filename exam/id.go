package exam

import (
	"encoding/hex"
	"time"
)

// ID names a patient, a visit or another record for ever, on every device. It is a
// UUID (RFC 9562) made outside this package; the zero ID names nothing.
type ID [16]byte

// IsZero reports whether the ID names nothing.
func (id ID) IsZero() bool { return id == ID{} }

// String returns the UUID in its usual form of 36 characters.
func (id ID) String() string {
	var b [36]byte
	hex.Encode(b[0:8], id[0:4])
	hex.Encode(b[9:13], id[4:6])
	hex.Encode(b[14:18], id[6:8])
	hex.Encode(b[19:23], id[8:10])
	hex.Encode(b[24:36], id[10:16])
	b[8], b[13], b[18], b[23] = '-', '-', '-', '-'
	return string(b[:])
}

// MarshalText makes an ID a string in JSON.
func (id ID) MarshalText() ([]byte, error) { return []byte(id.String()), nil }

// UnmarshalText reads what MarshalText wrote.
func (id *ID) UnmarshalText(b []byte) (err error) { *id, err = ParseID(string(b)); return err }

// ParseID reads a UUID of 36 characters in lower or upper case.
func ParseID(s string) (ID, error) {
	var id ID
	bad := &Invalid{"id", s, "a UUID such as 01936c1e-5d2a-7c41-9a40-6f1f2b7c9d10"}
	if len(s) != 36 || s[8] != '-' || s[13] != '-' || s[18] != '-' || s[23] != '-' {
		return id, bad
	}
	at := 0
	for _, part := range []string{s[0:8], s[9:13], s[14:18], s[19:23], s[24:36]} {
		n, err := hex.Decode(id[at:], []byte(part))
		if err != nil {
			return ID{}, bad
		}
		at += n
	}
	return id, nil
}

// Date is a calendar day, month or year as people know it: "2019", "2019-05" or "2019-05-07".
// The empty Date is «not known».
type Date string

// ParseDate checks the form and the calendar. It takes years 1900 to 2199.
func ParseDate(s string) (Date, error) {
	if s == "" {
		return "", nil
	}
	for _, layout := range []string{"2006-01-02", "2006-01", "2006"} {
		if t, err := time.Parse(layout, s); err == nil && t.Year() >= 1900 && t.Year() < 2200 {
			return Date(s), nil
		}
	}
	return "", &Invalid{"date", s, "a day such as 2019-05-07, a month 2019-05 or a year 2019"}
}

// DayOf returns the calendar day of t in t's own offset.
func DayOf(t time.Time) Date { return Date(t.Format("2006-01-02")) }

// Time returns the middle of the day, month or year in UTC, and false for an empty or malformed Date.
func (d Date) Time() (time.Time, bool) {
	if t, err := time.Parse("2006-01-02", string(d)); err == nil {
		return t.Add(12 * time.Hour), true
	}
	if t, err := time.Parse("2006-01", string(d)); err == nil {
		return t.AddDate(0, 0, 14), true
	}
	if t, err := time.Parse("2006", string(d)); err == nil {
		return t.AddDate(0, 6, 0), true
	}
	return time.Time{}, false
}

// DaysBefore returns the days from d to t, negative if d lies after t, and false for an unknown Date.
func (d Date) DaysBefore(t time.Time) (float64, bool) {
	at, ok := d.Time()
	if !ok {
		return 0, false
	}
	return t.Sub(at).Hours() / 24, true
}

// span returns the first day of d and the first day after it, and false for an empty or malformed Date.
func (d Date) span() (from, to time.Time, ok bool) {
	if t, err := time.Parse("2006-01-02", string(d)); err == nil {
		return t, t.AddDate(0, 0, 1), true
	}
	if t, err := time.Parse("2006-01", string(d)); err == nil {
		return t, t.AddDate(0, 1, 0), true
	}
	if t, err := time.Parse("2006", string(d)); err == nil {
		return t, t.AddDate(1, 0, 0), true
	}
	return time.Time{}, time.Time{}, false
}

// Before reports whether all of d lies before all of e. It is false where they
// overlap (a month and a day in it) and where one of them is not known.
func (d Date) Before(e Date) bool {
	_, end, ok := d.span()
	from, _, ok2 := e.span()
	return ok && ok2 && !end.After(from)
}
