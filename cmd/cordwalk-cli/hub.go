package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/stim"
	"cordwalk.example/cordwalk/storage/disk"
	"cordwalk.example/cordwalk/sync/extract"
	"cordwalk.example/cordwalk/sync/hub"
	"cordwalk.example/cordwalk/sync/hub/mailbox"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/share"
)

// hubCmd runs the clinic's hub.
type hubCmd struct {
	Data   string        `required:"" help:"Folder of the hub's own; it holds no key of the practice." placeholder:"DIR"`
	Listen string        `help:"Address to listen at." default:"0.0.0.0:4222" placeholder:"HOST:PORT"`
	Keep   time.Duration `help:"How long entries are kept for devices that were away." default:"2160h"`
	Bytes  int64         `help:"Most bytes kept." default:"8589934592"`
	sheetFlag
}

func (c *hubCmd) Run(e *env) error {
	o := mailbox.Options{Dir: c.Data, Listen: c.Listen, Limits: hub.Limits{Age: c.Keep, Bytes: c.Bytes}, Notice: func(w string) { e.warn(w) }}
	if e.c.Store != "" {
		// The list of devices comes from a store of the practice; nothing else does.
		if err := e.shared(c.sheetFlag, func(sh *share.Share) error { return mailbox.Setup(o, sh.List) }); err != nil {
			return err
		}
	} else if _, err := os.Stat(filepath.Join(c.Data, "root")); errors.Is(err, os.ErrNotExist) {
		return usage("%s", words.T("the hub in %s knows no practice yet: name one of its stores with --store DIR this once", c.Data))
	}
	m, err := mailbox.Start(e.ctx, o)
	if err != nil {
		return err
	}
	defer m.Close()
	a := m.Address()
	if e.c.JSON {
		if err := e.printJSON(map[string]any{"address": a.String()}); err != nil {
			return err
		}
	} else {
		e.say("%s", words.T("The hub runs. Devices reach it at: %s", a.String()))
	}
	<-e.ctx.Done()
	return nil
}

// clusterCmd prepares a NATS cluster that a group of clinics runs.
type clusterCmd struct {
	Nodes    string        `arg:"" optional:"" help:"Addresses of its nodes with commas between; without them only the list of users is printed." placeholder:"HOST:PORT,…"`
	Seed     string        `help:"File with the NATS seed of a user who may make streams there." placeholder:"FILE"`
	Replicas int           `help:"On how many nodes each entry lies." default:"3"`
	Keep     time.Duration `help:"How long entries are kept for devices that were away." default:"2160h"`
	Bytes    int64         `help:"Most bytes kept." default:"8589934592"`
	sheetFlag
}

func (c *clusterCmd) Run(e *env) error {
	var users string
	if err := e.shared(c.sheetFlag, func(sh *share.Share) (err error) {
		users, err = hub.Users(sh.List)
		return err
	}); err != nil {
		return err
	}
	if c.Nodes == "" {
		_, err := fmt.Fprint(e.out, users)
		return err
	}
	if c.Seed == "" {
		return usage("%s", words.T("name the file with the seed of a user who may make streams on the cluster: --seed FILE"))
	}
	at, err := hub.ParseAddress(c.Nodes)
	if err != nil {
		return usageError{err}
	}
	seed, err := e.readInput(c.Seed, 1<<10)
	if err != nil {
		return err
	}
	if err := hub.Prepare(e.ctx, at, bytes.TrimSpace(seed), hub.Limits{Age: c.Keep, Bytes: c.Bytes, Replicas: c.Replicas}); err != nil {
		return err
	}
	if e.c.JSON {
		return e.printJSON(map[string]any{"address": at.String(), "users": users})
	}
	e.say("%s", words.T("The cluster is ready. Devices reach it at: %s", at.String()))
	e.say("%s", words.T("It lets in whom its configuration names; run cluster without an address to print that part of it."))
	return nil
}

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
		return "", 0, errors.New("damaged")
	}
	return name, n, nil
}

func (p hubPlace) Save(hub string, seq uint64) error {
	return disk.Replace(disk.OS(), p.file, []byte(hub+" "+strconv.FormatUint(seq, 10)+"\n"))
}

// quiet is how long nothing must move until an exchange with a hub is done.
const quiet = 1500 * time.Millisecond

// hubClient makes a client of a hub.
func (e *env) hubClient(sh *share.Share, address string) (*hub.Client, hub.Address, error) {
	a, err := hub.ParseAddress(address)
	if err != nil {
		return nil, a, err
	}
	return hub.New(hub.Options{Address: a, Bag: func() key.Bag { return sh.Bag() }, Incarnation: sh.Incarnation, Journal: sh, Members: sh, Files: sh.Files,
		Place: hubPlace{filepath.Join(sh.Dir(), "hub.place")}, Notice: func(w string) { e.warn(w) },
		Extract: func(ctx context.Context, patient exam.ID, who string) ([]byte, error) {
			return extract.Give(ctx, sh.Store, patient, who, time.Now())
		}}), a, nil
}

// hubJSON says what a hub keeps, and what waits to go there.
type hubJSON struct {
	Unsent   uint64     `json:"unsent"`
	Since    *time.Time `json:"unsent_since,omitempty"`
	Rate     float64    `json:"entries_per_second"`
	KeptDays float64    `json:"kept_days"`
	MaxBytes int64      `json:"max_bytes"`
	Bytes    uint64     `json:"bytes"`
	Oldest   *time.Time `json:"oldest,omitempty"`
	Replicas int        `json:"replicas"`
}

func hubJSONOf(s hub.Status) *hubJSON {
	at := func(t time.Time) *time.Time {
		if t.IsZero() {
			return nil
		}
		t = t.UTC().Truncate(time.Second)
		return &t
	}
	return &hubJSON{Unsent: s.Unsent, Since: at(s.Since), Rate: s.Rate, KeptDays: s.Limits.Age.Hours() / 24, MaxBytes: s.Limits.Bytes, Bytes: s.Bytes, Oldest: at(s.Oldest), Replicas: s.Limits.Replicas}
}

// sayStatus says now and then what waits and how fast it goes, while an exchange goes on for ever.
func (e *env) sayStatus(s hub.Status) {
	switch {
	case s.Unsent > 0 && !s.Since.IsZero():
		e.say("%s", words.N(int(s.Unsent), "%[1]d entry waits for the hub since %[2]s", "%[1]d entries wait for the hub since %[2]s", s.Unsent, s.Since.Local().Format("2006-01-02 15:04")))
	case s.Rate > 0 || s.Behind > 0:
		e.say("%s", words.N(int(s.Rate+0.5), "%d entry a second", "%d entries a second", int(s.Rate+0.5)))
	}
}

// byHub exchanges with a hub until nothing moves any more, or for ever.
func (e *env) byHub(sh *share.Share, address string, stay bool) (syncJSON, error) {
	out := syncJSON{Peers: []string{}, Problems: []string{}}
	client, a, err := e.hubClient(sh, address)
	if err != nil {
		return out, err
	}
	ctx, cancel := context.WithCancel(e.ctx)
	defer cancel()
	done := make(chan error, 1)
	go func() { done <- client.Run(ctx) }()
	started, still, said := time.Now(), time.Now(), time.Now()
	var last hub.Status
	for {
		select {
		case err := <-done:
			if e.ctx.Err() != nil && stay {
				err = nil
			}
			return out, err
		case <-time.After(100 * time.Millisecond):
		}
		s := client.Status()
		out.Sent, out.Received, out.Hub = int(s.Sent), int(s.Received), hubJSONOf(s)
		if stay && !e.c.JSON && time.Since(said) > time.Minute {
			e.sayStatus(s)
			said = time.Now()
		}
		if s.Sent != last.Sent || s.Received != last.Received || s.Unsent > 0 || s.Behind > 0 || !s.Connected {
			still = time.Now()
		}
		last = s
		switch {
		case stay:
			continue
		case !s.Connected && time.Since(started) > 10*time.Second:
			cancel()
			<-done
			err := s.Err
			if err == nil {
				err = errors.New(words.T("no answer"))
			}
			return out, fmt.Errorf("%s: %w", words.T("the hub at %s cannot be reached", a.Host), err)
		case s.Connected && time.Since(still) > quiet:
			cancel()
			<-done
			if s.Refused != nil {
				out.Problems = append(out.Problems, s.Refused.Error())
			}
			out.Forks = len(s.Forks)
			for _, p := range s.Peers {
				out.Peers = append(out.Peers, sh.List.NameOf(p.Device))
			}
			return out, nil
		}
	}
}

// stimCmd fits a strength–duration test.
type stimCmd struct {
	File    string `arg:"" help:"File with a test, {\"muscle\": …, \"site\": …, \"readings\": [{\"width_ms\": 1, \"currents_ma\": [4.2]}, …]}; - is standard input."`
	Law     string `help:"weiss, weiss-log, weiss-charge, lapicque or lapicque-log." default:"weiss"`
	Compare string `help:"An earlier test of the same muscle." placeholder:"FILE"`
}

type fitJSON struct {
	Law       string       `json:"law"`
	Rheobase  rangeJSON    `json:"rheobase_ma"`
	Chronaxie rangeJSON    `json:"chronaxie_ms"`
	R2        *float64     `json:"r2"`
	Label     string       `json:"label"`
	Bad       []stim.Point `json:"bad"`
	Warnings  []string     `json:"warnings"`
	Ratio     *rangeJSON   `json:"chronaxie_ratio,omitempty"`
	Changed   *bool        `json:"changed,omitempty"`
}

type rangeJSON struct {
	Value *float64 `json:"value"`
	Low   *float64 `json:"low"`
	High  *float64 `json:"high"`
}

func rangeOf(i stim.Interval) rangeJSON {
	return rangeJSON{known(i.Value), known(i.Low), known(i.High)}
}

func (c *stimCmd) fit(e *env, name string, law stim.Law) (stim.Test, stim.Fit, error) {
	var t stim.Test
	data, err := e.readInput(name, 1<<20)
	if err != nil {
		return t, stim.Fit{}, err
	}
	if err := json.Unmarshal(data, &t); err != nil {
		return t, stim.Fit{}, fmt.Errorf("%s: %w", name, err)
	}
	if err := t.Validate(); err != nil {
		return t, stim.Fit{}, fmt.Errorf("%s: %w", name, err)
	}
	f, err := stim.Do(t.Points(), law)
	if err != nil {
		return t, f, fmt.Errorf("%s: %w", name, err)
	}
	return t, f, nil
}

func (c *stimCmd) Run(e *env) error {
	law, err := stim.ParseLaw(c.Law)
	if err != nil {
		return usageError{err}
	}
	t, f, err := c.fit(e, c.File, law)
	if err != nil {
		return err
	}
	out := fitJSON{Law: f.Law.String(), Rheobase: rangeOf(f.Rheobase), Chronaxie: rangeOf(f.Chronaxie), R2: known(f.R2), Label: f.Label().String(),
		Bad: []stim.Point{}, Warnings: some(f.Warnings)}
	for _, i := range f.Bad {
		out.Bad = append(out.Bad, f.Points[i])
	}
	if c.Compare != "" {
		_, before, err := c.fit(e, c.Compare, law)
		if err != nil {
			return err
		}
		if ratio, changed, ok := stim.Change(before, f); ok {
			r := rangeOf(ratio)
			out.Ratio, out.Changed = &r, &changed
		} else {
			out.Warnings = append(out.Warnings, words.T("the two tests cannot be compared"))
		}
	}
	if e.c.JSON {
		return e.printJSON(out)
	}
	site, _ := exam.ParseSite(t.Site)
	e.say("%s, %s (%s)", t.Muscle, view.SiteName(site), out.Law)
	show := func(i stim.Interval) string {
		return fmt.Sprintf("%.3g (%.3g–%.3g)", i.Value, i.Low, i.High)
	}
	e.say("%s", words.T("Rheobase %s mA, chronaxie %s ms: %s", show(f.Rheobase), show(f.Chronaxie), words.Of(out.Label)))
	for _, p := range out.Bad {
		e.say("%s", words.T("The threshold at %s ms does not fit the others: take it again.", view.Plain(p.Width)))
	}
	for _, w := range out.Warnings {
		e.say("%s", words.T("Note: %s", w))
	}
	if out.Ratio != nil {
		word := words.T("no real change of the chronaxie")
		if *out.Changed {
			word = words.T("the chronaxie has changed")
		}
		e.say("%s", words.T("Against the earlier test: × %.2f, %s", *out.Ratio.Value, word))
	}
	e.say("%s", words.T("A chronaxie describes a muscle and names no diagnosis; ask the veterinarian."))
	return nil
}
