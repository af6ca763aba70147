package view

import (
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// AttachmentWords says what an attachment is: "photo, JPEG, 2.4 MB".
func AttachmentWords(a exam.Attachment) string {
	size := words.T("%s MB", number(float64(a.Size)/1e6))
	if a.Size < 100_000 {
		size = words.T("%s kB", number(float64(a.Size)/1e3))
	}
	if a.Photo() {
		return words.T("photo, %s, %s", strings.ToUpper(a.Format), size)
	}
	return words.T("clip, %s, %s", strings.ToUpper(a.Format), size)
}

// ClipWords says what a clip is, with how long it lasts: "clip, MOV, 12.4 MB, 0:18".
func ClipWords(a exam.Attachment, length time.Duration) string {
	s := AttachmentWords(a)
	if n := int(length.Round(time.Second).Seconds()); n > 0 {
		s = words.T("%s, %d:%02d", s, n/60, n%60)
	}
	return s
}

// AttachmentFile is a name for a copy of an attachment outside the program: the day, a number, what
// it is. The animal's name stands in it only if the therapist puts it there.
func AttachmentFile(v exam.Visit, at int) string {
	kind := "clip"
	if v.Attachments[at].Photo() {
		kind = "photo"
	}
	ext := v.Attachments[at].Format
	if ext == "jpeg" {
		ext = "jpg"
	}
	return v.Examined.Format("2006-01-02") + "-" + kind + "-" + string(rune('1'+at%9)) + "." + ext
}
