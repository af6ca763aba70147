package main

import (
	"bytes"
	"context"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/alecthomas/kong"
)

// speaking are the folders whose texts people read. The papers of app/sheet are read by a test of their own
// (TestPapersInEveryLanguage); what else stands there names columns and fields of files, which are English.
var speaking = []string{"app/desk", "app/desk/mark", "app/desk/look", "app/view", "app/chart", "cmd/cordwalk", "cmd/cordwalk-cli"}

// prose is what a text for people looks like: two words, or a word with a capital.
var prose = regexp.MustCompile(`[A-Za-z]{2,} [A-Za-z]{2,}|^[A-Z][a-z]{2,}`)

// unspoken are literals that look like prose and are none: names, formats of files and of programs.
var unspoken = set(
	// the program's name, languages by their own names, folders and files
	"Cordwalk", "English", "Deutsch", "Español", "Français", "AppData", "Library", "Application Support", "Documents",
	"NotoSans-Regular.ttf", "NotoSans-Bold.ttf", "Noto Sans", "Bramble", "Local", "Normal",
	// names of keys as the toolkit calls them
	"Down", "Left", "Right", "End", "Space",
	// what tables of other programs say
	"female spayed", "female neutered", "weiblich kastriert", "femelle sterilisee", "hembra esterilizada", "hembra castrada",
	"male neutered", "male castrated", "mannlich kastriert", "male castre", "macho castrado", "disc extrusion",
	// sources, as they are cited
	"Davis2002, abstract: within 3 months, mean days", "Khan2024: by 12 weeks, median days", "Langerhuus2017, abstract: mean of case series",
	"Martins2021: within 3 months, uncontrolled", "Feb2023: median days", "Khan2024: median days",
	// what is compared or kept, and said by other texts
	"not the examiner's PIN", "a longer pulse needed more current (", "%d animals as records", "%d animals as FHIR", "an extract of ",
	// what only a fault of the program can show
	"%q names no screen", "this window is closing; nothing more can be entered",
	"chart: the embedded regular font cannot be read: ", "chart: the embedded bold font cannot be read: ",
)

func set(list ...string) map[string]bool {
	out := map[string]bool{}
	for _, s := range list {
		out[s] = true
	}
	return out
}

// keyed is a key with the keys that are held with it; view.KeyWords says it.
var keyed = regexp.MustCompile(`^(Ctrl|Alt|Shift)\+.$`)

// TestNoTextIsBesideTheCatalogue walks the source of everything that speaks to people: a literal that looks
// like prose is a key of the catalogue, or it is listed here as something else.
func TestNoTextIsBesideTheCatalogue(t *testing.T) {
	c := load(t, english)
	known := func(s string) bool {
		if _, ok := c.Texts[s]; ok || unspoken[s] || keyed.MatchString(s) {
			return true
		}
		for other, forms := range c.Plurals {
			if s == other || s == forms["one"] {
				return true
			}
		}
		return false
	}
	used := map[string]bool{}
	for _, dir := range speaking {
		files, err := filepath.Glob(filepath.Join("..", "..", filepath.FromSlash(dir), "*.go"))
		if err != nil || len(files) == 0 {
			t.Fatalf("%s: %d files, %v", dir, len(files), err)
		}
		for _, name := range files {
			if strings.HasSuffix(name, "_test.go") {
				continue
			}
			for _, l := range literalsOf(t, name) {
				if !prose.MatchString(l.text) {
					continue
				}
				if unspoken[l.text] {
					used[l.text] = true
				}
				if !known(l.text) {
					t.Errorf("%s: %q stands in no catalogue", l.at, l.text)
				}
			}
		}
	}
	for s := range unspoken {
		if !used[s] {
			t.Errorf("%q is listed as no text and stands nowhere", s)
		}
	}
}

type placedLiteral struct {
	text string
	at   string
}

// literalsOf lists the constant texts of a file, those that are put together as one; tags of fields, imports and
// patterns of regular expressions are none.
func literalsOf(t *testing.T, name string) []placedLiteral {
	t.Helper()
	src, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	fset := token.NewFileSet()
	f, err := parser.ParseFile(fset, name, src, 0)
	if err != nil {
		t.Fatal(err)
	}
	var out []placedLiteral
	var walk func(n ast.Node) bool
	walk = func(n ast.Node) bool {
		switch x := n.(type) {
		case *ast.ImportSpec:
			return false
		case *ast.Field:
			if x.Tag != nil {
				ast.Inspect(x.Type, walk)
				return false
			}
		case *ast.CallExpr:
			if sel, ok := x.Fun.(*ast.SelectorExpr); ok && sel.Sel.Name == "MustCompile" {
				return false
			}
		case ast.Expr:
			if s, ok := literal(x); ok {
				out = append(out, placedLiteral{s, fset.Position(x.Pos()).String()})
				return false
			}
		}
		return true
	}
	ast.Inspect(f, walk)
	return out
}

// TestHelpIsTranslated runs --help of every command in German and looks for English help texts.
func TestHelpIsTranslated(t *testing.T) {
	t.Setenv("CORDWALK_LANG", "de")
	german := load(t, filepath.Join(filepath.Dir(english), "de.json"))
	var c commands
	parser, err := kong.New(&c, kong.Vars{"version": version})
	if err != nil {
		t.Fatal(err)
	}
	var every func(n *kong.Node, path []string)
	every = func(n *kong.Node, path []string) {
		var out, wrong bytes.Buffer
		if code := run(context.Background(), append(slices.Clone(path), "--help"), nil, &out, &wrong); code != exitDone {
			t.Fatalf("%v: %d, %s", path, code, wrong.String())
		}
		said := strings.Join(strings.Fields(out.String()), " ")
		helps := []string{n.Help}
		for _, f := range n.Flags {
			helps = append(helps, f.Help)
		}
		for _, p := range n.Positional {
			helps = append(helps, p.Help)
		}
		for _, h := range append(helps, "Usage: ", "Flags:", "Show context-sensitive help.") {
			if h = strings.TrimSpace(h); h != "" && german.Texts[h] != h && strings.Contains(said, h) {
				t.Errorf("%v says %q", path, h)
			}
		}
		for _, child := range n.Children {
			if child.Type == kong.CommandNode {
				every(child, append(slices.Clone(path), child.Name))
			}
		}
	}
	every(parser.Model.Node, nil)
	var out, wrong bytes.Buffer
	if code := run(context.Background(), []string{"patients", "--al"}, nil, &out, &wrong); code != exitUsage || !strings.Contains(wrong.String(), "es gibt keine Option --al") {
		t.Errorf("a wrong option: %d, %s", code, wrong.String())
	}
}

// The language is the one asked for, else the system's where there are texts in it.
func TestLanguageOfTheCommandLine(t *testing.T) {
	for _, n := range []string{"CORDWALK_LANG", "LC_ALL", "LC_MESSAGES", "LANG"} {
		t.Setenv(n, "")
	}
	for _, tt := range []struct {
		env, value string
		args       []string
		want       string
	}{
		{"LANG", "de_AT.UTF-8", nil, "de-AT"}, {"LC_ALL", "fr_FR", nil, "fr-FR"}, {"CORDWALK_LANG", "es", nil, "es"},
		{"CORDWALK_LANG", "es", []string{"patients", "--lang", "de"}, "de"}, {"LANG", "", []string{"--lang=fr", "check"}, "fr"},
	} {
		t.Setenv(tt.env, tt.value)
		if got, _ := languageOf(tt.args); got != tt.want {
			t.Errorf("%s=%s %v: %q, want %q", tt.env, tt.value, tt.args, got, tt.want)
		}
	}
}
