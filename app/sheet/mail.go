package sheet

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"mime"
	"mime/multipart"
	"mime/quotedprintable"
	"net/mail"
	"net/textproto"
	"net/url"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// recipient is to whom a paper goes: the owner, or for the clinical papers the treating
// veterinarian.
func recipient(in Input, d Document) exam.Contact {
	if d.Kind == KindSheet {
		return in.Patient.Owner
	}
	return in.Patient.Veterinarian
}

// MailAddress is the e-mail address a paper goes to, empty where none is on file that can be
// written to.
func MailAddress(in Input, d Document) string {
	a, err := mail.ParseAddress(strings.TrimSpace(recipient(in, d).Email))
	if err != nil {
		return ""
	}
	return a.Address
}

// MailText is the short text that goes with a paper, in the paper's language. It holds no
// findings, those stand on the paper, but says to an owner what cannot wait.
func MailText(in Input, d Document) string {
	lang := in.lang()
	day := dayWords(lang, in.last().Examined)
	var parts []string
	if n := strings.TrimSpace(recipient(in, d).Name); n != "" {
		parts = append(parts, words.In(lang, "Dear %s,", n))
	}
	if d.Kind != KindSheet {
		parts = append(parts, words.In(lang, "Attached are the findings of %[1]s from the visit on %[2]s. Please call us with any question.", in.Patient.Name, day))
	} else {
		text := words.In(lang, "Attached is the sheet about %[1]s from the visit on %[2]s. Please call us with any question.", in.Patient.Name, day)
		if next := in.last().NextVisit; next != "" {
			text += " " + words.In(lang, "The next visit is on %s.", dateWords(lang, next))
		}
		parts = append(parts, text)
		if list := in.urgent(); len(list) > 0 {
			head := in.text(textTodayBox)
			if list[0].Urgency == Now {
				head = in.text(textNowBox)
			}
			parts = append(parts, head+colon(lang)+unbroken(in.Patient.Veterinarian.Phone)+"\n"+in.text(textUntilAgrees))
		}
		parts = append(parts, in.text(textSupport))
	}
	parts = append(parts, strings.Join(nonEmpty(in.Practice.Name, in.Practice.Contact.Phone), "\n"))
	return strings.Join(parts, "\n\n") + "\n"
}

func nonEmpty(parts ...string) []string {
	var out []string
	for _, p := range parts {
		if p = strings.TrimSpace(p); p != "" {
			out = append(out, p)
		}
	}
	return out
}

// Mail returns a draft e-mail (RFC 5322, with the paper attached) that a mail program opens
// for the therapist to look at and send; this program sends nothing. The header X-Unsent
// tells mail programs that know it that this is a draft. An empty address takes the
// owner's, or the treating veterinarian's for the clinical papers; without one the draft has
// no recipient. The same input gives the same bytes.
func Mail(in Input, d Document, to string) ([]byte, error) {
	if to = strings.TrimSpace(to); to == "" {
		to = strings.TrimSpace(recipient(in, d).Email)
	}
	var address string
	if to != "" {
		a, err := mail.ParseAddress(to)
		if err != nil {
			return nil, fmt.Errorf("the address %.80q is no e-mail address; write one such as name@example.org", to)
		}
		address = a.String()
	}
	var parts bytes.Buffer
	mw := multipart.NewWriter(&parts)
	if err := mw.SetBoundary("cordwalk-" + strings.TrimSuffix(d.Name, ".pdf")); err != nil {
		if err := mw.SetBoundary("cordwalk-paper"); err != nil {
			return nil, fmt.Errorf("making the draft: %w", err)
		}
	}
	text, err := mw.CreatePart(textproto.MIMEHeader{"Content-Type": {"text/plain; charset=utf-8"}, "Content-Transfer-Encoding": {"quoted-printable"}})
	if err != nil {
		return nil, fmt.Errorf("making the draft: %w", err)
	}
	qp := quotedprintable.NewWriter(text)
	if _, err := qp.Write([]byte(strings.ReplaceAll(MailText(in, d), "\n", "\r\n"))); err != nil {
		return nil, fmt.Errorf("making the draft: %w", err)
	}
	if err := qp.Close(); err != nil {
		return nil, fmt.Errorf("making the draft: %w", err)
	}
	file, err := mw.CreatePart(textproto.MIMEHeader{"Content-Type": {`application/pdf; name="` + d.Name + `"`},
		"Content-Disposition": {`attachment; filename="` + d.Name + `"`}, "Content-Transfer-Encoding": {"base64"}})
	if err != nil {
		return nil, fmt.Errorf("making the draft: %w", err)
	}
	for b := []byte(base64.StdEncoding.EncodeToString(d.PDF)); len(b) > 0; {
		n := min(76, len(b))
		if _, err := file.Write(append(b[:n:n], '\r', '\n')); err != nil {
			return nil, fmt.Errorf("making the draft: %w", err)
		}
		b = b[n:]
	}
	if err := mw.Close(); err != nil {
		return nil, fmt.Errorf("making the draft: %w", err)
	}
	var out bytes.Buffer
	header := func(name, value string) {
		if value != "" {
			fmt.Fprintf(&out, "%s: %s\r\n", name, value)
		}
	}
	header("MIME-Version", "1.0")
	header("Date", in.At.Format(time.RFC1123Z))
	header("To", address)
	if a, err := mail.ParseAddress(in.Practice.Contact.Email); err == nil {
		header("From", (&mail.Address{Name: in.Practice.Name, Address: a.Address}).String())
	}
	header("Subject", mime.QEncoding.Encode("utf-8", oneLine(d.Subject)))
	header("X-Unsent", "1")
	header("Content-Type", `multipart/mixed; boundary="`+mw.Boundary()+`"`)
	out.WriteString("\r\n")
	out.Write(parts.Bytes())
	return out.Bytes(), nil
}

// oneLine keeps a header from being broken into two.
func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// MailURL is the address (RFC 6068) that opens the system's mail program with the text of a
// paper. It cannot carry the paper: that is attached by hand, or taken from Mail.
func MailURL(in Input, d Document) string {
	q := "subject=" + mailEscape(oneLine(d.Subject)) + "&body=" + mailEscape(strings.ReplaceAll(MailText(in, d), "\n", "\r\n"))
	return "mailto:" + mailEscape(MailAddress(in, d)) + "?" + q
}

// mailEscape escapes as RFC 6068 asks: a space is %20, never +.
func mailEscape(s string) string { return strings.ReplaceAll(url.QueryEscape(s), "+", "%20") }
