package sheet

import (
	"encoding/base64"
	"io"
	"mime"
	"mime/multipart"
	"net/mail"
	"net/url"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestMailIsADraftWithThePaper reads the draft back with the standard library's reader of
// RFC 5322 messages.
func TestMailIsADraftWithThePaper(t *testing.T) {
	for _, lang := range []string{"en", "de", "es", "fr"} {
		in := patients()["recovery"]
		in.Patient.Name = "Bruño\r\nBcc: all@example.org"
		in.Patient.Owner.Email = "mara@example.org"
		in.Options.Lang = lang
		doc, err := Owner(in)
		require.NoError(t, err)
		raw, err := Mail(in, doc, "")
		require.NoError(t, err)
		again, err := Mail(in, doc, "")
		require.NoError(t, err)
		assert.Equal(t, raw, again)
		m, err := mail.ReadMessage(strings.NewReader(string(raw)))
		require.NoError(t, err)
		to, err := m.Header.AddressList("To")
		require.NoError(t, err)
		assert.Equal(t, "mara@example.org", to[0].Address)
		assert.Equal(t, "1", m.Header.Get("X-Unsent"))
		assert.Empty(t, m.Header.Get("Bcc"), "a name cannot add a header")
		subject, err := new(mime.WordDecoder).DecodeHeader(m.Header.Get("Subject"))
		require.NoError(t, err)
		assert.Contains(t, subject, "Bruño")
		kind, params, err := mime.ParseMediaType(m.Header.Get("Content-Type"))
		require.NoError(t, err)
		require.Equal(t, "multipart/mixed", kind)
		r := multipart.NewReader(m.Body, params["boundary"])
		text, err := r.NextPart()
		require.NoError(t, err)
		body, err := io.ReadAll(text)
		require.NoError(t, err)
		assert.Contains(t, string(body), "+43 1 555 0142")
		file, err := r.NextPart()
		require.NoError(t, err)
		assert.Equal(t, doc.Name, file.FileName())
		data, err := io.ReadAll(base64.NewDecoder(base64.StdEncoding, file))
		require.NoError(t, err)
		assert.Equal(t, doc.PDF, data)
		_, err = r.NextPart()
		assert.Equal(t, io.EOF, err)
	}
	in := patients()["recovery"]
	doc, err := Owner(in)
	require.NoError(t, err)
	_, err = Mail(in, doc, "not an address")
	assert.ErrorContains(t, err, "name@example.org")
	raw, err := Mail(in, doc, "")
	require.NoError(t, err)
	assert.NotContains(t, string(raw), "\r\nTo:", "an owner without an address: no recipient")
}

func TestMailURL(t *testing.T) {
	in := patients()["recovery"]
	in.Patient.Owner.Email = "mara+dogs@example.org"
	doc, err := Owner(in)
	require.NoError(t, err)
	s := MailURL(in, doc)
	assert.NotContains(t, s, "+", "a plus sign would be read as one")
	u, err := url.Parse(s)
	require.NoError(t, err)
	assert.Equal(t, "mailto", u.Scheme)
	to, err := url.PathUnescape(u.Opaque)
	require.NoError(t, err)
	assert.Equal(t, "mara+dogs@example.org", to)
	assert.Equal(t, doc.Subject, u.Query().Get("subject"))
	body := u.Query().Get("body")
	for _, want := range []string{"Dear Mara Lindqvist,\r\n", "Attached is the sheet about Bruno", "The next visit is on 11 May 2026.", "does not take the place of your veterinarian"} {
		assert.Contains(t, body, want)
	}
	assert.NotContains(t, body, "leg", "no findings in a mail")

	in = patients()["relapse"]
	text := MailText(in, Document{Kind: KindSheet})
	assert.Contains(t, text, "Call your vet now: +43\u00a01\u00a0555\u00a00123\nNo exercises until your veterinarian agrees.")
	assert.NotContains(t, MailText(in, Document{Kind: KindLetter}), "No exercises")
	assert.Contains(t, MailText(in, Document{Kind: KindLetter}), "Dear Dr Anselm Brook")
}
