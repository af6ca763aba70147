package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"text/tabwriter"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/app/view/picture"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
)

// examAttachCmd adds a photo or a clip to a visit.
type examAttachCmd struct {
	Visit    string `arg:"" help:"Id of the visit."`
	File     string `arg:"" help:"Photo (JPEG, PNG; up to 25 MB) or clip (MP4, MOV, WebM; up to 200 MB)."`
	Note     string `help:"What it shows."`
	Reason   string `help:"Why a closed visit is changed."`
	Examiner string `help:"Who adds it; the visit's examiner where not said."`
}

func (c *examAttachCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		if v.State == exam.Closed && c.Reason == "" {
			return usage("%s", words.T("the visit is closed: say why it is changed with --reason"))
		}
		in, err := os.Open(c.File)
		if err != nil {
			return err
		}
		defer in.Close()
		info, err := in.Stat()
		if err != nil {
			return err
		}
		clean, err := picture.Clean(in, info.Size())
		if err != nil {
			return fmt.Errorf("%s: %w", filepath.Base(c.File), err)
		}
		files, err := attach.Open(e.ctx, s, nil)
		if err != nil {
			return err
		}
		name, err := files.Add(e.ctx, v.Patient, clean.Reader)
		if err != nil {
			return err
		}
		who, err := e.examinerOr(s, c.Examiner, v.Examiner)
		if err != nil {
			return err
		}
		x := exam.Attachment{ID: storage.NewID(), Name: name, Format: clean.Format, Size: clean.Size, Note: c.Note}
		after := v
		after.Attachments = append(slices.Clone(v.Attachments), x)
		edits := storage.VisitEdits(v, after)
		if v.State == exam.Closed {
			edits = storage.AmendEdits(v, c.Reason, edits...)
		}
		if _, err := s.Apply(e.ctx, who, edits...); err != nil {
			return err
		}
		if e.c.JSON {
			return e.printJSON(x)
		}
		e.say("%s", words.T("Kept: %s", view.AttachmentWords(x)))
		return nil
	})
}

// examAttachmentsCmd lists the photos and clips of a visit.
type examAttachmentsCmd struct {
	Visit string `arg:"" help:"Id of the visit."`
}

func (c *examAttachmentsCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		if e.c.JSON {
			return e.printJSON(map[string]any{"attachments": append([]exam.Attachment{}, v.Attachments...)})
		}
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		for i, x := range v.Attachments {
			fmt.Fprintf(w, "%d\t%s\t%s\n", i+1, view.AttachmentWords(x), x.Note)
		}
		return w.Flush()
	})
}

// examExtractCmd writes a photo or a clip of a visit to a file.
type examExtractCmd struct {
	Visit  string `arg:"" help:"Id of the visit."`
	Number int    `arg:"" help:"Its number, as exam attachments prints it."`
	Output string `short:"o" required:"" help:"File to write; it must not be there yet." placeholder:"FILE"`
}

func (c *examExtractCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		v, err := e.visit(s, c.Visit)
		if err != nil {
			return err
		}
		if c.Number < 1 || c.Number > len(v.Attachments) {
			return errors.New(words.N(len(v.Attachments), "this visit has %d photo or clip", "this visit has %d photos and clips", len(v.Attachments)))
		}
		files, err := attach.Open(e.ctx, s, nil)
		if err != nil {
			return err
		}
		in, err := files.Read(v.Patient, v.Attachments[c.Number-1].Name)
		if errors.Is(err, os.ErrNotExist) || errors.Is(err, attach.ErrNoKey) {
			return errors.New(words.T("not here yet: it comes with the next exchange"))
		}
		if err != nil {
			return err
		}
		defer in.Close()
		out, err := os.OpenFile(c.Output, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
		if err != nil {
			return err
		}
		_, err = io.Copy(out, in)
		if err = errors.Join(err, out.Close()); err != nil {
			return errors.Join(err, os.Remove(c.Output))
		}
		e.say("%s", words.T("A copy lies in %s. It is not sealed there.", c.Output))
		return nil
	})
}
