package desk

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/extract"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/share"
)

// hubPlace remembers beside the store how far a hub was read.
type hubPlace struct{ file string }

func (p hubPlace) Load() (string, uint64, error) {
	data, err := os.ReadFile(p.file)
	if err != nil {
		return "", 0, err
	}
	name, seq, ok := strings.Cut(strings.TrimSpace(string(data)), " ")
	n, err := strconv.ParseUint(seq, 10, 64)
	if !ok || err != nil {
		return "", 0, errors.New(words.T("%s is damaged; it is written anew", p.file))
	}
	return name, n, nil
}

func (p hubPlace) Save(name string, seq uint64) error {
	return disk.Replace(disk.OS(), p.file, []byte(name+" "+strconv.FormatUint(seq, 10)+"\n"))
}

const (
	hubQuiet = 1500 * time.Millisecond // nothing moved for so long: the exchange is done
	hubWait  = 10 * time.Second        // for an answer
)

// throughHub exchanges with a hub until nothing moves any more.
func throughHub(ctx context.Context, sh *share.Share, address string, notice func(string)) (hub.Status, error) {
	at, err := hub.ParseAddress(address)
	if err != nil {
		return hub.Status{}, err
	}
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	client := hub.New(hub.Options{Address: at, Bag: func() key.Bag { return sh.Bag() }, Incarnation: sh.Incarnation, Journal: sh, Members: sh,
		Files: sh.Files, Place: hubPlace{filepath.Join(sh.Dir(), "hub.place")}, Notice: notice,
		Extract: func(ctx context.Context, patient exam.ID, who string) ([]byte, error) {
			return extract.Give(ctx, sh.Store, patient, who, time.Now())
		}})
	done := make(chan error, 1)
	go func() { done <- client.Run(ctx) }()
	started, still := time.Now(), time.Now()
	var last hub.Status
	for {
		select {
		case err := <-done:
			return last, err
		case <-time.After(100 * time.Millisecond):
		}
		s := client.Status()
		if s.Sent != last.Sent || s.Received != last.Received || s.Unsent > 0 || s.Behind > 0 || !s.Connected {
			still = time.Now()
		}
		last = s
		switch {
		case !s.Connected && time.Since(started) > hubWait:
			cancel()
			<-done
			err := s.Err
			if err == nil {
				err = errors.New(words.T("no answer"))
			}
			return s, fmt.Errorf("%s: %w", words.T("the hub at %s cannot be reached", at.Host), err)
		case s.Connected && time.Since(still) > hubQuiet:
			cancel()
			<-done
			return s, nil
		}
	}
}

// hub exchanges by the network with a hub of the practice.
func (p *devicesPage) hub() fyne.CanvasObject {
	a := p.win.app
	field := mark.NewField(a.settings.Hub, func(s string) { a.settings.Hub = strings.TrimSpace(s) }).Hint(words.T("The address that the hub prints when it starts"))
	now := mark.NewButton(words.T("Exchange now"), "devices", func() {
		place := a.settings.Hub
		if place == "" {
			p.win.foot.fail(words.T("Name the hub first."), nil)
			return
		}
		p.do(words.T("Exchanging…"), func(ctx context.Context, _ told) (func(), error) {
			if err := a.saver.Flush(ctx); err != nil {
				return nil, err
			}
			s, err := throughHub(ctx, p.share, place, func(say string) { a.onUI(func() { p.win.foot.say(say) }) })
			if err != nil {
				return nil, err
			}
			at := a.now()
			lines := []string{words.T("%d taken in, %d handed over", s.Received, s.Sent)}
			if s.Limits.Bytes > 0 {
				lines = append(lines, words.T("The hub keeps entries for %[1]d days and at most %[2]d MB; it holds %[3]d kB.", int(s.Limits.Age.Hours()/24), s.Limits.Bytes/1e6, s.Bytes/1e3))
			}
			if s.Unsent > 0 {
				lines = append(lines, words.N(int(s.Unsent), "%[1]d entry waits for the hub since %[2]s", "%[1]d entries wait for the hub since %[2]s", s.Unsent, s.Since.Local().Format("2006-01-02 15:04")))
			}
			if s.Refused != nil {
				lines = append(lines, words.T("A message was left alone: %s", s.Refused.Error()))
			}
			if n := len(s.Forks); n > 0 {
				lines = append(lines, words.N(n, "%d device was copied and both copies were used; both branches are kept", "%d devices were copied and both copies were used; both branches are kept", n))
			}
			return func() {
				a.shared = at
				p.report = lines
				p.win.strip.update()
				p.win.foot.say(lines[0])
				p.findChoices()
			}, nil
		})
	})
	return section(words.T("Exchange by a hub in the network"), mark.NewLabelled(words.T("Address of the hub"), field), mark.Left(now))
}
