package sheet

import (
	"bytes"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

func TestCalendar(t *testing.T) {
	list := demoAnimals()
	list[0].Patient.Name = "Bruno; the dog, with a very long name that will not fit on one line of a calendar, Ёлка"
	list[1].Patient.Status = exam.Discharged
	list[2].Visits[len(list[2].Visits)-1].NextVisit = "2026-06" // no day
	var buf bytes.Buffer
	n, err := Calendar(&buf, animalsOf(list...), time.Date(2026, 5, 4, 12, 0, 0, 0, zone), "en")
	require.NoError(t, err)
	assert.Equal(t, 1, n)
	for _, line := range strings.Split(strings.TrimSuffix(buf.String(), "\r\n"), "\r\n") {
		assert.LessOrEqual(t, len(line), 75)
		assert.NotContains(t, line, "\n")
	}
	whole := strings.ReplaceAll(buf.String(), "\r\n ", "")
	for _, want := range []string{"BEGIN:VCALENDAR\r\n", "DTSTAMP:20260504T110000Z\r\n", "DTSTART;VALUE=DATE:20260511\r\n", "DTEND;VALUE=DATE:20260512\r\n",
		`SUMMARY:Visit: Bruno\; the dog\, with a very long name that will not fit on one line of a calendar\, Ёлка (Mara Lindqvist)`, "END:VCALENDAR\r\n"} {
		assert.Contains(t, whole, want)
	}
	_, err = Calendar(fullDisk{}, animalsOf(list...), time.Now(), "en")
	assert.ErrorContains(t, err, "no space")
}

func TestOwnerMessage(t *testing.T) {
	in := patients()["recovery"]
	in.Patient.Owner.Email = "mara@example.org"
	doc, err := Owner(in)
	require.NoError(t, err)
	m := OwnerMessage(in, doc)
	assert.Contains(t, m.Body, "Dear Mara Lindqvist,")
	assert.Contains(t, m.Body, "The next visit is on 11 May 2026.")
	assert.NotContains(t, m.Body, "leg", "no findings in a mail")
	u, err := url.Parse(m.Mailto())
	require.NoError(t, err)
	assert.Equal(t, "mailto", u.Scheme)
	q, err := url.ParseQuery(u.RawQuery)
	require.NoError(t, err)
	assert.Equal(t, m.Subject, q.Get("subject"))
	assert.Equal(t, m.Body, strings.ReplaceAll(q.Get("body"), "\r\n", "\n"))
	assert.Contains(t, m.Text(doc.Name), "Attach: bruno-2026-05-04-owner.pdf")

	m = OwnerMessage(patients()["relapse"], doc)
	assert.Contains(t, m.Body, "No exercises until your veterinarian agrees.")
	assert.Contains(t, m.Body, "+43 1 555 0123")
}
