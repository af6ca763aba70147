package desk

import (
	"context"
	"errors"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/assets/words"
)

// composer is the program of the freedesktop systems that opens the user's mail program on a
// new message with its subject, text and attachment filled in (xdg-utils).
const composer = "xdg-email"

// composeWait is how long the composer may take before it is believed to have opened the mail
// program; some return at once, some when the message is sent.
const composeWait = 5 * time.Second

// draft is a paper to be mailed: the same in each form a system may take.
type draft struct {
	to, subject, text string
	pdf, eml          string // files, where only this user can read them
	mailto            string // without the paper
}

// newDraft writes a paper and its draft e-mail into a folder of its own.
func newDraft(in sheet.Input, d sheet.Document) (draft, error) {
	message, err := sheet.Mail(in, d, sheet.MailAddress(in, d))
	if err != nil {
		return draft{}, err
	}
	dir, err := os.MkdirTemp("", "cordwalk-mail-")
	if err != nil {
		return draft{}, err
	}
	out := draft{to: sheet.MailAddress(in, d), subject: d.Subject, text: sheet.MailText(in, d), mailto: sheet.MailURL(in, d),
		pdf: filepath.Join(dir, d.Name), eml: filepath.Join(dir, strings.TrimSuffix(d.Name, ".pdf")+".eml")}
	return out, errors.Join(os.WriteFile(out.pdf, d.PDF, 0o600), os.WriteFile(out.eml, message, 0o600))
}

// open shows the draft in the system's mail program and says how: with the paper attached by
// the composer, as a draft file, or as an address with the paper to be attached by hand.
// openURL hands an address to the system. Nothing is sent.
func (m draft) open(ctx context.Context, openURL func(*url.URL) error) (string, error) {
	if m.compose(ctx) {
		return words.T("Opened as a new message in the mail program, with the paper attached; nothing was sent."), nil
	}
	file := openURL(&url.URL{Scheme: "file", Path: filepath.ToSlash(m.eml)})
	if file == nil {
		return words.T("Opened as a draft in the system's mail program; nothing was sent."), nil
	}
	u, err := url.Parse(m.mailto)
	if err == nil {
		err = openURL(u)
	}
	if err != nil {
		return "", errors.Join(file, err)
	}
	return words.T("The mail program is open. Attach the paper by hand; it lies in %s", m.pdf), nil
}

// compose runs the composer where the system has it, and reports whether it took the message.
func (m draft) compose(ctx context.Context) bool {
	if runtime.GOOS != "linux" && !strings.HasSuffix(runtime.GOOS, "bsd") {
		return false
	}
	program, err := exec.LookPath(composer)
	if err != nil {
		return false
	}
	args := []string{"--utf8", "--subject", m.subject, "--body", m.text, "--attach", m.pdf}
	if m.to != "" {
		args = append(args, "mailto:"+m.to)
	}
	c := exec.Command(program, args...)
	if c.Start() != nil {
		return false
	}
	ended := make(chan error, 1)
	go func() { ended <- c.Wait() }()
	select {
	case err := <-ended:
		return err == nil
	case <-time.After(composeWait):
	case <-ctx.Done():
	}
	return true
}
