package sheet

import (
	"bytes"
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
