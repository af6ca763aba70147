package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"strings"
	"time"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/audit"
	"cordwalk.example/cordwalk/sync/extract"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/share"
)

// extractMakeCmd writes an extract to a file.
type extractMakeCmd struct {
	Patient  string `arg:"" help:"Id or name of the patient."`
	File     string `arg:"" help:"File to write; a new one."`
	Examiner string `help:"Who hands it over."`
}

func (c *extractMakeCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		if _, err := os.Lstat(c.File); err == nil {
			return fmt.Errorf("%s", words.T("%s is there already; name a new file", c.File))
		}
		data, err := extract.Make(s, r.Patient.ID, time.Now())
		if err != nil {
			return err
		}
		if err := disk.Replace(disk.OS(), c.File, data); err != nil {
			return err
		}
		if err := audit.Write(e.ctx, s, who, audit.Exported, fmt.Sprintf("an extract of %s", r.Patient.ID)); err != nil {
			return err
		}
		e.say("%s", words.T("Written: %s", c.File))
		return nil
	})
}

// extractShowCmd shows an extract.
type extractShowCmd struct {
	File string `arg:"" help:"File with an extract; - is standard input."`
	sheetFlag
}

func (c *extractShowCmd) Run(e *env) error {
	data, err := e.readInput(c.File, extract.MaxSize+1<<10)
	if err != nil {
		return err
	}
	return e.shared(c.sheetFlag, func(sh *share.Share) error { return e.showExtract(sh, data) })
}

// showExtract checks an extract and shows it.
func (e *env) showExtract(sh *share.Share, data []byte) error {
	x, err := extract.Read(data, sh.Bag(), func(v key.Verifier) bool {
		d, ok := sh.List.Device(v)
		return ok && d.Member()
	})
	if err != nil {
		return err
	}
	r, err := sh.Show(x.Changes)
	if err != nil {
		return err
	}
	if !e.c.JSON {
		d, _ := sh.List.Device(x.Signer)
		e.say("%s", words.T("To be read only: as %[1]s knew it on %[2]s. Nothing of it is kept here.", d.Name, x.Made.Time().Local().Format("2006-01-02 15:04")))
	}
	return e.show(sh.Store, r)
}

// extractFetchCmd asks for a patient of another site.
type extractFetchCmd struct {
	Patient string        `arg:"" help:"Id of the patient, as the other site tells it."`
	Hub     string        `required:"" help:"Address of the hub." placeholder:"HOST:PORT#CERTIFICATE"`
	Wait    time.Duration `help:"How long to wait for the answer." default:"30s"`
	Again   bool          `help:"Ask for a new one although an earlier one was answered."`
	Keep    string        `help:"Also write the extract to this file, for extract show." placeholder:"FILE"`
	sheetFlag
}

func (c *extractFetchCmd) Run(e *env) error {
	id, err := exam.ParseID(strings.ToLower(c.Patient))
	if err != nil {
		return usage("%s", words.T("%s is no id of a patient: the other site finds it with patient show", c.Patient))
	}
	return e.shared(c.sheetFlag, func(sh *share.Share) error {
		client, _, err := e.hubClient(sh, c.Hub)
		if err != nil {
			return err
		}
		ctx, cancel := context.WithCancel(e.ctx)
		done := make(chan error, 1)
		go func() { done <- client.Run(ctx) }()
		within, stop := context.WithTimeout(ctx, c.Wait)
		defer stop()
		data, err := client.FetchExtract(within, id, c.Again)
		why := client.Status()
		cancel()
		if rerr := <-done; rerr != nil {
			return rerr
		}
		switch {
		case errors.Is(err, hub.ErrNoExtract) && e.ctx.Err() != nil:
			return e.ctx.Err()
		case errors.Is(err, hub.ErrNoExtract) && !why.Connected:
			return fmt.Errorf("%s: %w", words.T("the hub at %s cannot be reached", c.Hub), err)
		case errors.Is(err, hub.ErrNoExtract):
			e.warn(words.T("The hub keeps the question until a device of that site comes by; run this again then."))
			return err
		case err != nil:
			return err
		}
		if c.Keep != "" {
			if err := disk.Replace(disk.OS(), c.Keep, data); err != nil {
				return err
			}
		}
		return e.showExtract(sh, data)
	})
}
