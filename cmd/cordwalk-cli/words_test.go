package main

import (
	"bytes"
	"encoding/json"
	"flag"
	"go/ast"
	"go/parser"
	"go/token"
	"maps"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"testing"

	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam/stim"
	"cordwalk.example/cordwalk/sync/audit"
)

var update = flag.Bool("update", false, "write the catalogue of English texts anew")

// catalogue is every text of the program: singular ones, and plurals by their plural form.
type catalogue struct {
	Texts   map[string]string            `json:"texts"`
	Plurals map[string]map[string]string `json:"plurals"`
}

var english = filepath.Join("..", "..", "assets", "words", "lang", "en.json")

// textArg says which arguments of a function of package words are texts.
var textArgs = map[string][]int{"T": {0}, "In": {1}, "N": {1, 2}, "NIn": {2, 3}}

// collect reads the texts of every call in the program's sources.
func collect(t *testing.T) catalogue {
	t.Helper()
	out := catalogue{map[string]string{}, map[string]map[string]string{}}
	root := filepath.Join("..", "..")
	err := filepath.WalkDir(root, func(name string, d os.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() {
			if n := d.Name(); name != root && (strings.HasPrefix(n, ".") || n == "testdata") {
				return filepath.SkipDir
			}
			return nil
		}
		if !strings.HasSuffix(name, ".go") || strings.HasSuffix(name, "_test.go") || strings.Contains(filepath.ToSlash(name), "assets/words/") {
			return nil
		}
		fset := token.NewFileSet()
		f, err := parser.ParseFile(fset, name, nil, 0)
		if err != nil {
			return err
		}
		if strings.Contains(filepath.ToSlash(name), "/cmd/") {
			for _, h := range helps(f) {
				out.Texts[h] = h
			}
		}
		imported := ""
		for _, i := range f.Imports {
			if i.Path.Value == strconv.Quote(module+"/assets/words") {
				imported = "words"
				if i.Name != nil {
					imported = i.Name.Name
				}
			}
		}
		if imported == "" {
			return nil
		}
		ast.Inspect(f, func(n ast.Node) bool {
			call, ok := n.(*ast.CallExpr)
			if !ok {
				return true
			}
			sel, ok := call.Fun.(*ast.SelectorExpr)
			if !ok {
				return true
			}
			if x, ok := sel.X.(*ast.Ident); !ok || x.Name != imported {
				return true
			}
			if sel.Sel.Name == "Of" || sel.Sel.Name == "OfIn" {
				if s, ok := literal(call.Args[len(call.Args)-1]); ok {
					out.Texts[s] = s
				}
				return true
			}
			at, ok := textArgs[sel.Sel.Name]
			if !ok {
				return true
			}
			var texts []string
			for _, i := range at {
				if i >= len(call.Args) {
					return true
				}
				s, ok := literal(call.Args[i])
				if !ok {
					t.Errorf("%s: the text of words.%s is not a constant", fset.Position(call.Pos()), sel.Sel.Name)
					return true
				}
				texts = append(texts, s)
			}
			if len(texts) == 2 {
				out.Plurals[texts[1]] = map[string]string{"one": texts[0], "other": texts[1]}
			} else {
				out.Texts[texts[0]] = texts[0]
			}
			return true
		})
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	terms := slices.Concat(view.Terms(), sheet.Terms(), languageTerms(), returned(t, filepath.Join(root, "exam", "protocol.go"), "NotAsked"))
	for _, d := range []audit.Did{audit.Exported, audit.Printed, audit.BackedUp, audit.Restored, audit.Invited, audit.Joined, audit.Refused, audit.Removed,
		audit.Confirmed, audit.Erased, audit.Admitted, audit.Made, audit.Amended, audit.Closed, audit.United, audit.Parted, audit.Looked} {
		terms = append(terms, string(d))
	}
	for _, l := range []stim.Label{stim.Uncertain, stim.NerveLike, stim.MuscleLike} {
		terms = append(terms, l.String())
	}
	for _, w := range terms {
		if w != "" {
			out.Texts[w] = w
		}
	}
	return out
}

// helps lists the help texts in the tags of a command line's fields.
func helps(f *ast.File) (out []string) {
	ast.Inspect(f, func(n ast.Node) bool {
		if x, ok := n.(*ast.Field); ok && x.Tag != nil {
			if tag, err := strconv.Unquote(x.Tag.Value); err == nil {
				if h := reflect.StructTag(tag).Get("help"); h != "" {
					out = append(out, h)
				}
			}
		}
		return true
	})
	return out
}

// returned lists the constant texts that a function returns.
func returned(t *testing.T, file, function string) []string {
	t.Helper()
	f, err := parser.ParseFile(token.NewFileSet(), file, nil, 0)
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	ast.Inspect(f, func(n ast.Node) bool {
		if d, ok := n.(*ast.FuncDecl); ok && d.Name.Name != function {
			return false
		}
		if r, ok := n.(*ast.ReturnStmt); ok && len(r.Results) == 1 {
			if s, ok := literal(r.Results[0]); ok {
				out = append(out, s)
			}
		}
		return true
	})
	if len(out) == 0 {
		t.Errorf("%s returns no text", function)
	}
	return out
}

// literal is the value of a constant text: a literal, or literals put together.
func literal(e ast.Expr) (string, bool) {
	switch x := e.(type) {
	case *ast.BasicLit:
		s, err := strconv.Unquote(x.Value)
		return s, err == nil && x.Kind == token.STRING
	case *ast.BinaryExpr:
		a, ok1 := literal(x.X)
		b, ok2 := literal(x.Y)
		return a + b, ok1 && ok2 && x.Op == token.ADD
	case *ast.ParenExpr:
		return literal(x.X)
	}
	return "", false
}

func encode(t *testing.T, c catalogue) []byte {
	t.Helper()
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", "  ")
	if err := enc.Encode(c); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// TestEveryTextIsInTheCatalogue: every text that people read is a constant and stands in the
// list that translators work from, and nothing else does. After a change of texts:
// go test ./cmd/cordwalk-cli -run Catalogue -update
func TestEveryTextIsInTheCatalogue(t *testing.T) {
	want := collect(t)
	if *update {
		if err := os.WriteFile(english, encode(t, want), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	got := load(t, english)
	compareKeys(t, "en", keysOf(want.Texts), keysOf(got.Texts))
	compareKeys(t, "en, plurals", keysOf(want.Plurals), keysOf(got.Plurals))
}

func load(t *testing.T, name string) catalogue {
	t.Helper()
	data, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	var c catalogue
	if err := json.Unmarshal(data, &c); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return c
}

func keysOf[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }

func compareKeys(t *testing.T, what string, want, got []string) {
	t.Helper()
	var missing, unused []string
	for _, k := range want {
		if _, ok := slices.BinarySearch(got, k); !ok {
			missing = append(missing, k)
		}
	}
	for _, k := range got {
		if _, ok := slices.BinarySearch(want, k); !ok {
			unused = append(unused, k)
		}
	}
	if len(missing) > 0 {
		t.Errorf("%s: %d texts are missing, the first %q", what, len(missing), missing[:min(10, len(missing))])
	}
	if len(unused) > 0 {
		t.Errorf("%s: %d texts are not used, the first %q", what, len(unused), unused[:min(10, len(unused))])
	}
}

var verb = regexp.MustCompile(`%(\[\d+\])?[-+# 0]*[\d.]*[a-zA-Z%]`)

// verbsOf lists the places of a text that are filled in, each with its number.
func verbsOf(s string) []string {
	var out []string
	n := 0
	for _, v := range verb.FindAllString(s, -1) {
		if v == "%%" || strings.HasSuffix(v, "%") {
			continue
		}
		n++
		at := strconv.Itoa(n)
		if i := strings.IndexByte(v, '['); i >= 0 {
			at = v[i+1 : strings.IndexByte(v, ']')]
			n, _ = strconv.Atoi(at)
		}
		out = append(out, at+v[len(v)-1:])
	}
	sort.Strings(out)
	return out
}

// TestTranslationsAreComplete: every language has every text, no other ones, with the same
// places to fill in.
func TestTranslationsAreComplete(t *testing.T) {
	want := load(t, english)
	files, err := filepath.Glob(filepath.Join(filepath.Dir(english), "*.json"))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range files {
		tag := strings.TrimSuffix(filepath.Base(name), ".json")
		if tag == "en" {
			continue
		}
		t.Run(tag, func(t *testing.T) {
			got := load(t, name)
			compareKeys(t, tag, keysOf(want.Texts), keysOf(got.Texts))
			compareKeys(t, tag+", plurals", keysOf(want.Plurals), keysOf(got.Plurals))
			for k, v := range got.Texts {
				if v == "" {
					t.Errorf("%q is empty", k)
				}
				if !slices.Equal(verbsOf(k), verbsOf(v)) {
					t.Errorf("%q and %q do not take the same things", k, v)
				}
			}
			for k, forms := range got.Plurals {
				if forms["other"] == "" || forms["one"] == "" {
					t.Errorf("%q lacks a form", k)
				}
				for _, v := range forms {
					if !slices.Equal(verbsOf(k), verbsOf(v)) && len(verbsOf(v)) > len(verbsOf(k)) {
						t.Errorf("%q and %q do not take the same things", k, v)
					}
				}
			}
		})
	}
}
