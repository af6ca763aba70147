package storage

import (
	"encoding/hex"
	"testing"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// Stored values can never change: each encoding is written down here, byte for byte, and was made by hand
// from RFC 8949.
func TestEncodingsStayAsTheyAre(t *testing.T) {
	at := time.Date(2026, 3, 2, 10, 15, 0, 0, time.FixedZone("", 3600))
	for _, tt := range []struct {
		name  string
		value []byte
		want  string
	}{
		{"text", encodeText("Fern"), "01" + "64" + "4665726e"},
		{"empty text", encodeText(""), ""},
		{"flag", encodeFlag(true), "01" + "f5"},
		{"number", encodeNumber(14), "01" + "0e"},
		{"tested finding", encodeFinding(exam.Finding{Item: exam.Patellar, Site: exam.PelvicLeft, Result: exam.Graded(2)}), "01" + "a1" + "0102"},
		{"untested finding", encodeFinding(exam.Finding{Item: exam.Hopping, Site: exam.PelvicLeft, Result: exam.Untested(exam.Pain)}), "01" + "a1" + "02" + "647061696e"},
		{"finding with everything", encodeFinding(exam.Finding{Item: exam.SpinalPain, Site: exam.Lumbar, Result: exam.Graded(1), Level: exam.NewVertebra(exam.RegionL, 3), Side: exam.Left, How: exam.RestNormal, Seen: true, Block: "b", Note: "n"}),
			"01" + "a7" + "0101" + "03" + "624c33" + "04" + "646c656674" + "0502" + "06f5" + "07" + "6162" + "08" + "616e"},
		{"examined", encodeExamined(at, "X"), "01" + "a3" + "01" + "1a" + "69a55514" + "03" + "190e10" + "04" + "6158"},
		{"measure", encodeMeasure(exam.Measured{Measure: exam.Weight, Value: 9.5, Clipped: true}), "01" + "a2" + "01" + "f948c0" + "03" + "f5"},
		{"contact", encodeValue(exam.Contact{Name: "A", Phone: "1"}), "01" + "a2" + "01" + "6141" + "02" + "6131"},
		{"attachment", encodeValue(exam.Attachment{Name: "ab", Format: "png", Size: 300, Note: "n"}), "01" + "a4" + "01" + "626162" + "02" + "63706e67" + "03" + "19012c" + "04" + "616e"},
		{"stimulation", encodeValue(exam.StimRecord{Kind: "test", Data: "{}"}), "01" + "a2" + "01" + "6474657374" + "02" + "627b7d"},
		{"doses", encodeValue([]exam.DoseGiven{{Medicine: "m", Hours: 2}}), "01" + "81" + "a2" + "01" + "616d" + "02" + "f94000"},
	} {
		if got := hex.EncodeToString(tt.value); got != tt.want {
			t.Errorf("%s: got %s, want %s", tt.name, got, tt.want)
		}
	}
}
