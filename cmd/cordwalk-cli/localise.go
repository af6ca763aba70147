package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/localise"
)

// localiseCmd localises exam files.
type localiseCmd struct {
	Files []string `arg:"" name:"file" help:"Exam files, or folders of them; - is standard input."`
	Text  bool     `help:"Print for people instead of JSON."`
}

// located is one answer with the file it belongs to.
type located struct {
	File string `json:"file,omitempty"`
	*localise.Result
}

// failed is the line of a file that was refused, among several.
type failed struct {
	File  string `json:"file"`
	Error string `json:"error"`
}

func (c *localiseCmd) Run(e *env) error {
	files, err := examFiles(c.Files)
	if err != nil {
		return err
	}
	several := len(files) != 1 || files[0] != c.Files[0]
	out := bufio.NewWriterSize(e.out, 1<<16)
	defer out.Flush()
	enc := json.NewEncoder(out)
	enc.SetEscapeHTML(false)
	engines := map[exam.Species]*localise.Engine{}
	bar := e.progress()
	bad := 0
	for i, name := range files {
		if err := e.ctx.Err(); err != nil {
			return err
		}
		if several && bar != nil {
			bar(words.T("localising"), int64(i+1), int64(len(files)))
		}
		res, err := c.one(e, engines, name, several)
		if err != nil {
			if !several {
				return err
			}
			bad++
			if err := enc.Encode(failed{name, strings.TrimPrefix(err.Error(), name+": ")}); err != nil {
				return err
			}
			continue
		}
		switch {
		case c.Text:
			if several {
				fmt.Fprintf(out, "%s\n", name)
			}
			printResult(out, res)
		case several:
			err = enc.Encode(located{name, res})
		default:
			enc.SetIndent("", "  ")
			err = enc.Encode(res)
		}
		if err != nil {
			return err
		}
	}
	if bad > 0 {
		if err := out.Flush(); err != nil {
			return err
		}
		e.warn(words.N(bad, "%d file was refused", "%d files were refused", bad))
		return errSaidNo
	}
	return out.Flush()
}

// one localises one file.
func (c *localiseCmd) one(e *env, engines map[exam.Species]*localise.Engine, name string, several bool) (*localise.Result, error) {
	data, err := e.readInput(name, examMax)
	if err != nil {
		return nil, err
	}
	f, warnings, err := exam.DecodeFile(data)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	engine := engines[f.Species]
	if engine == nil {
		if engine, err = localise.New(f.Species); err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		engines[f.Species] = engine
	}
	res, err := engine.Compute(localise.OfFile(f))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	if len(warnings) > 0 {
		copied := *res
		copied.Warnings = append(slices.Clone(warnings), res.Warnings...)
		res = &copied
		if !several {
			for _, w := range warnings {
				e.warn(name + ": " + w)
			}
		}
	}
	return res, nil
}

// examFiles lists the files that the arguments name; a folder stands for the JSON files in
// it, in the order of their names.
func examFiles(args []string) ([]string, error) {
	var out []string
	for _, a := range args {
		if a == "-" {
			out = append(out, a)
			continue
		}
		st, err := os.Stat(a)
		if err != nil {
			return nil, err
		}
		if !st.IsDir() {
			out = append(out, a)
			continue
		}
		entries, err := os.ReadDir(a)
		if err != nil {
			return nil, err
		}
		n := 0
		for _, d := range entries {
			if !d.IsDir() && strings.EqualFold(filepath.Ext(d.Name()), ".json") {
				out = append(out, filepath.Join(a, d.Name()))
				n++
			}
		}
		if n == 0 {
			return nil, errors.New(words.T("there is no exam file (*.json) in %s", a))
		}
	}
	return out, nil
}

// percent writes a probability as people read it: never 0 % or 100 % of what is only nearly so.
func percent(p float64) string {
	switch {
	case p > 0 && p < 0.005:
		return "< 1 %"
	case p < 1 && p >= 0.995:
		return "> 99 %"
	}
	return fmt.Sprintf("%.0f %%", 100*p)
}

// cellName is a cell as people read it, from the words of an answer.
func cellName(item, site string) string {
	i, err := exam.ParseItem(item)
	if err != nil {
		return item + " " + site
	}
	at, _ := exam.ParseSite(site)
	return view.CellName(exam.Key{Item: i, Site: at})
}

// printResult prints an answer for people.
func printResult(w interface{ Write([]byte) (int, error) }, r *localise.Result) {
	var b bytes.Buffer
	fmt.Fprintf(&b, "%s\n", words.T("Likely site: %s", r.Summary))
	for i, g := range r.Regions {
		if i >= 4 || g.Probability < 0.01 {
			break
		}
		fmt.Fprintf(&b, "  %-12s %s\n", g.Region, percent(g.Probability))
	}
	fmt.Fprintf(&b, "%s\n", words.T("Sites:"))
	for i, s := range r.Sites {
		if i >= 5 || s.Probability < 0.01 {
			break
		}
		fmt.Fprintf(&b, "  %s, %s\n", s.Words, percent(s.Probability))
	}
	strong := func(title string, sign float64) {
		list := slices.Clone(r.Evidence)
		slices.SortStableFunc(list, func(a, b localise.Evidence) int {
			switch {
			case sign*a.Decibans > sign*b.Decibans:
				return -1
			case sign*a.Decibans < sign*b.Decibans:
				return 1
			}
			return 0
		})
		n := 0
		for _, x := range list {
			if n >= 4 || sign*x.Decibans < 0.5 {
				break
			}
			if n == 0 {
				fmt.Fprintf(&b, "%s\n", title)
			}
			n++
			fmt.Fprintf(&b, "  %+5.1f  %s: %d\n", x.Decibans, cellName(x.Item, x.Site), x.Grade)
		}
	}
	strong(words.T("Evidence for it, in decibans:"), 1)
	strong(words.T("Evidence against it:"), -1)
	if len(r.Next) > 0 {
		fmt.Fprintf(&b, "%s\n", words.T("What would tell most next:"))
		for i, n := range r.Next {
			if i >= 3 {
				break
			}
			due := ""
			if n.Due {
				due = ", " + words.T("due")
			}
			fmt.Fprintf(&b, "  %s (%.2f %s, %d s%s)\n", cellName(n.Item, n.Site), n.Bits, words.T("bits"), n.Seconds, due)
		}
	}
	for _, x := range r.Warnings {
		fmt.Fprintf(&b, "%s\n", words.T("Note: %s", x))
	}
	fmt.Fprintf(&b, "%s\n", words.T("This supports and never replaces the veterinarian."))
	_, _ = w.Write(b.Bytes())
}

// likely prints the likely site of a visit.
func (e *env) likely(p exam.Patient, v exam.Visit) error {
	engine, err := localise.New(p.Species)
	if err != nil {
		return err
	}
	res, err := engine.Compute(localise.OfVisit(p, v))
	if err != nil {
		return err
	}
	printResult(e.out, res)
	return nil
}
