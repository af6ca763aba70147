package main

import (
	"bytes"
	"io"
	"os"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/alecthomas/kong"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/sync/audit"
)

// languageOf is the language of what is printed: the one that the command line or CORDWALK_LANG names, else
// the system's where there are texts in it. It is found before the command line is understood, because help
// and complaints about the command line are printed in it, too.
func languageOf(args []string) (tag string, asked bool) {
	for i, a := range args {
		if v, ok := strings.CutPrefix(a, "--lang="); ok {
			return v, true
		}
		if a == "--lang" && i+1 < len(args) {
			return args[i+1], true
		}
		if a == "--" {
			break
		}
	}
	if v := os.Getenv("CORDWALK_LANG"); v != "" {
		return v, true
	}
	for _, name := range []string{"LC_ALL", "LC_MESSAGES", "LANG"} { // in the order of POSIX.1-2017, 8.2
		if v := os.Getenv(name); v != "" {
			v, _, _ = strings.Cut(v, ".")
			return strings.ReplaceAll(v, "_", "-"), false
		}
	}
	return "en", false
}

// translate puts every help text of the command line into the language in use.
func translate(n *kong.Node) {
	n.Help = words.Of(n.Help)
	for _, f := range n.Flags {
		f.Help = words.Of(f.Help)
	}
	for _, p := range n.Positional {
		p.Help = words.Of(p.Help)
	}
	for _, c := range n.Children {
		translate(c)
	}
}

// headings are the words that the parser sets above and below its lists.
var headings = []string{"Usage: ", "Arguments:", "Flags:", "Commands:", "Show context-sensitive help.",
	"Run \"%s --help\" for more information on a command.", "Run \"%s <command> --help\" for more information on a command."}

// printHelp prints the parser's help with its own headings in the language in use.
func printHelp(o kong.HelpOptions, c *kong.Context) error {
	out := c.Stdout
	var b bytes.Buffer
	c.Stdout = &b
	err := kong.DefaultHelpPrinter(o, c)
	c.Stdout = out
	if err != nil {
		return err
	}
	lines := strings.Split(b.String(), "\n")
	for i, l := range lines {
		for _, h := range headings {
			before, after, verb := strings.Cut(h, "%s")
			switch {
			case verb && strings.HasPrefix(l, before) && strings.HasSuffix(l, after):
				name := l[len(before) : len(l)-len(after)]
				lines[i] = strings.Replace(words.Of(h), "%s", name, 1)
			case !verb && strings.HasPrefix(l, h):
				lines[i] = words.Of(h) + l[len(h):]
			}
		}
	}
	_, err = io.WriteString(out, strings.Join(lines, "\n"))
	return err
}

// complaints are what the parser says of a command line that it does not understand, with the pattern of each.
var complaints = []struct {
	pattern *regexp.Regexp
	say     func(m []string) string
}{
	{regexp.MustCompile(`^unknown flag (\S+)(?:, did you mean (?:one of )?(.+)\?)?$`), func(m []string) string {
		if m[2] != "" {
			return words.T("there is no option %[1]s; perhaps %[2]s is meant", m[1], m[2])
		}
		return words.T("there is no option %s", m[1])
	}},
	{regexp.MustCompile(`^unexpected argument (\S+)(?:, did you mean (?:one of )?(.+)\?)?$`), func(m []string) string {
		if m[2] != "" {
			return words.T("%[1]s is not understood here; perhaps %[2]s is meant", m[1], m[2])
		}
		return words.T("%s is not understood here", m[1])
	}},
	{regexp.MustCompile(`^missing flags: (.+)$`), func(m []string) string { return words.T("still to be said: %s", m[1]) }},
	{regexp.MustCompile(`^expected (?:one of )?(.+)$`), func(m []string) string { return words.T("still to be said: %s", m[1]) }},
}

// complaint says an error of the command line in the language in use.
func complaint(err error) string {
	for _, c := range complaints {
		if m := c.pattern.FindStringSubmatch(err.Error()); m != nil {
			return c.say(m)
		}
	}
	return err.Error()
}

var exportedAs = regexp.MustCompile(`^(\d+) animals as (.+)$`)

// auditWords says in the language in use what an entry of the audit is about.
func auditWords(x audit.Entry) string {
	note := x.What
	if m := exportedAs.FindStringSubmatch(note); m != nil {
		n, _ := strconv.Atoi(m[1])
		note = words.N(n, "%[1]d animal as %[2]s", "%[1]d animals as %[2]s", n, words.Of(m[2]))
	}
	if name, ok := strings.CutPrefix(note, "an extract of "); ok {
		note = words.T("an extract of %s", name)
	}
	switch x.Did {
	case audit.Made:
		note = words.Of(note)
	case audit.Amended, audit.Admitted:
		note = view.FieldTitle(note)
	case audit.Invited:
		if at, err := time.Parse(time.RFC3339, strings.TrimPrefix(note, "until ")); err == nil {
			note = words.T("until %s", view.Day(at)+" "+at.Format("15:04 MST"))
		}
	}
	if x.Reason != "" {
		note = view.Labelled(note, x.Reason)
	}
	return note
}

// languageTerms are the words of this file that stand in tables.
func languageTerms() []string { return append(slices.Clone(headings), "patient", "visit", "records") }
