package main

import (
	_ "embed"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/app/view/demo"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// demoCmd fills a new practice with invented animals.
type demoCmd struct {
	Run_  bool   `name:"run" help:"Show it all: fill a temporary practice, record one more exam from a file, print what changed, the segment scores and the likely site, and write the owner's sheet."`
	File  string `help:"With --run: the exam to record; one that comes with the program where not said." placeholder:"FILE"`
	Today string `help:"The day on which the practice is meant to be open; a fixed day where not said, so that everybody sees the same." placeholder:"DATE"`
}

//go:embed demo_exam.json
var demoExam []byte

// demoAnimal is the animal of the exam that comes with the program.
const demoAnimal = "Bramble"

func (c *demoCmd) Run(e *env) error {
	day := demo.LastDay
	if c.Today != "" {
		d, err := exam.ParseDate(c.Today)
		t, ok := d.Time()
		if err != nil || !ok || len(c.Today) != len("2006-01-02") {
			return usage("--today: %s", words.T("use a day such as 2026-03-02"))
		}
		day = t
	}
	if c.Run_ {
		return c.show(e, day)
	}
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	if !isNew(dir) {
		return fmt.Errorf("%s", words.T("%s is not empty; the demo practice is never mixed with other data, give it a new folder", dir))
	}
	p, err := c.fill(e, dir, day)
	if err != nil {
		return err
	}
	n := 0
	for _, x := range p.Cases {
		n += len(x.Visits)
	}
	if e.c.JSON {
		return e.printJSON(map[string]any{"patients": len(p.Cases), "visits": n, "store": dir, "demo": true})
	}
	e.say("%s", words.T("%s: %d invented animals with %d visits in %s", p.Practice.Name, len(p.Cases), n, dir))
	e.say("%s", words.T("Not protected: the key lies beside the data."))
	return nil
}

// fill makes the demo practice in a folder; where it fails, the folder is as it was.
func (c *demoCmd) fill(e *env, dir string, day time.Time) (demo.Practice, error) {
	p := demo.New(demo.Seed, day)
	_, statErr := os.Stat(dir)
	s, err := storage.Create(dir, e.options(storage.Unlock{KeyInStore: true}))
	if err == nil {
		err = closing(s, func(s *storage.Store) error {
			bar := e.progress()
			return demo.Fill(e.ctx, s, p, func(done, total int) {
				if bar != nil {
					bar(words.T("demo practice"), int64(done), int64(total))
				}
			})
		})
		if err != nil {
			removeContents(dir, statErr != nil)
		}
	}
	return p, err
}

// removeContents empties a folder that this command filled.
func removeContents(dir string, itself bool) {
	if itself {
		_ = os.RemoveAll(dir)
		return
	}
	entries, err := os.ReadDir(dir)
	if err != nil {
		return
	}
	for _, d := range entries {
		_ = os.RemoveAll(filepath.Join(dir, d.Name()))
	}
}

// show runs the whole job once.
func (c *demoCmd) show(e *env, day time.Time) error {
	base, err := os.MkdirTemp("", "cordwalk-demo-")
	if err != nil {
		return err
	}
	dir := filepath.Join(base, "practice")
	e.say("%s", words.T("1. A practice of invented animals in %s", dir))
	p, err := c.fill(e, dir, day)
	if err != nil {
		_ = os.RemoveAll(base)
		return err
	}
	e.c.Store = dir
	return e.with(func(s *storage.Store) error {
		list, err := s.Caseload(e.ctx)
		if err != nil {
			return err
		}
		cases := view.NewCaseload(list, day)
		for _, r := range cases.Rows() {
			e.say("   %-9s %-4s %s  %s, %s", r.Summary.Name, view.SpeciesName(r.Summary.Species), limbWords(r.Summary.Motor), r.DueWords, r.Change.Word)
		}
		data, name := demoExam, "demo_exam.json"
		if c.File != "" {
			name = c.File
			if data, err = e.readInput(c.File, examMax); err != nil {
				return err
			}
		}
		f, _, err := exam.DecodeFile(data)
		if err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
		if c.File == "" || f.Examined.IsZero() {
			f.Examined = day.Add(10 * time.Hour)
		}
		r, err := e.patient(s, demoAnimal)
		if err != nil {
			return err
		}
		e.say("\n%s", words.T("2. One more exam of %s, from a file (%s)", r.Patient.Name, name))
		add := examAddCmd{File: name, Protocol: exam.FullSpinal}
		if err := add.record(e, s, r, f); err != nil {
			return err
		}
		if r, err = s.Patient(r.Patient.ID); err != nil {
			return err
		}
		n := len(r.Visits)
		e.say("\n%s", words.T("3. What changed since last week"))
		if err := e.compare(s, r, r.Visits[n-2], r.Visits[n-1], false); err != nil {
			return err
		}
		e.say("\n%s", words.T("4. The course"))
		e.scoreTable(r.Patient, r.Visits)
		e.say("\n%s", words.T("5. The likely site"))
		if err := e.likely(r.Patient, r.Visits[n-1]); err != nil {
			return err
		}
		d, err := sheet.Owner(view.SheetInput(p.Practice, r.Patient, r.Visits, r.Visits[n-1].Examined, sheet.Options{}))
		if err != nil {
			return err
		}
		out := filepath.Join(base, d.Name)
		if err := e.writeFile(out, d.PDF); err != nil {
			return err
		}
		e.say("\n%s", words.T("6. The owner's progress sheet: %s", out))
		return nil
	})
}
