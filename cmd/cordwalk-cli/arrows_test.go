package main

import (
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"testing"
)

const module = "cordwalk.example/cordwalk"

// pkg is a package of this module with what its files import.
type pkg struct {
	path    string // below the module, "" is its root
	dir     string
	imports []string
	deps    []string
}

func goList(t *testing.T, args ...string) []string {
	t.Helper()
	cmd := exec.Command("go", append([]string{"list"}, args...)...)
	cmd.Dir = filepath.Join("..", "..")
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list %s: %v", strings.Join(args, " "), err)
	}
	return strings.Split(strings.TrimSpace(string(out)), "\n")
}

func packages(t *testing.T) []pkg {
	t.Helper()
	var out []pkg
	for _, line := range goList(t, "-f", `{{.ImportPath}}|{{.Dir}}|{{join .Imports " "}}|{{join .Deps " "}}`, "./...") {
		part := strings.Split(line, "|")
		out = append(out, pkg{strings.TrimPrefix(strings.TrimPrefix(part[0], module), "/"), part[1], strings.Fields(part[2]), strings.Fields(part[3])})
	}
	if len(out) < 10 {
		t.Fatalf("only %d packages were listed", len(out))
	}
	return out
}

func under(path string, roots ...string) bool {
	for _, r := range roots {
		if path == r || strings.HasPrefix(path, r+"/") {
			return true
		}
	}
	return false
}

// TestImportsPointOneWay holds the arrows of the design:
// cmd → app/desk → app/{view, chart, sheet} → sync/{carry, hub} → storage → sync/{change, merge} → exam.
func TestImportsPointOneWay(t *testing.T) {
	layers := []struct {
		name  string
		roots []string
		deny  []string // packages of this module that must not stand among its dependencies
	}{
		{"exam", []string{"exam"}, []string{"sync", "storage", "app", "assets", "cmd"}},
		{"assets", []string{"assets"}, []string{"sync", "storage", "app", "cmd"}},
		{"frames and rules of merging", []string{"sync/change", "sync/merge", "sync/key"}, []string{"sync/carry", "sync/hub", "storage", "app", "cmd"}},
		{"storage", []string{"storage"}, []string{"sync/carry", "sync/hub", "app", "cmd"}},
		{"carrying", []string{"sync/carry", "sync/hub"}, []string{"app", "cmd"}},
		{"models, charts, sheets", []string{"app/view", "app/chart", "app/sheet"}, []string{"app/desk", "cmd"}},
		{"desk", []string{"app/desk"}, []string{"cmd"}},
	}
	for _, p := range packages(t) {
		for _, l := range layers {
			if !under(p.path, l.roots...) {
				continue
			}
			for _, d := range p.deps {
				own, ok := strings.CutPrefix(d, module+"/")
				if ok && under(own, l.deny...) {
					t.Errorf("%s: %s depends on %s", l.name, p.path, own)
				}
			}
		}
	}
}

// TestExamStaysPure: the domain does no I/O, knows no clock, and uses nothing but the pure
// part of the standard library and gonum.
func TestExamStaysPure(t *testing.T) {
	impure := []string{"os", "net", "io/fs", "syscall", "unsafe", "log", "math/rand", "math/rand/v2", "crypto/rand", "path/filepath", "embed"}
	for _, p := range packages(t) {
		if !under(p.path, "exam") {
			continue
		}
		for _, i := range p.imports {
			first, _, _ := strings.Cut(i, "/")
			switch {
			case slices.Contains(impure, i), under(i, "os", "net"):
				t.Errorf("%s imports %s", p.path, i)
			case strings.Contains(first, ".") && !under(i, module+"/exam") && !under(i, "gonum.org/v1/gonum"):
				t.Errorf("%s imports %s", p.path, i)
			}
		}
		each(t, p.dir, func(name string, n ast.Node) {
			if sel, ok := n.(*ast.SelectorExpr); ok {
				if x, ok := sel.X.(*ast.Ident); ok && x.Name == "time" && slices.Contains([]string{"Now", "Since", "Until", "Local", "LoadLocation", "After", "Sleep"}, sel.Sel.Name) {
					t.Errorf("%s: the domain asks the clock or the machine: time.%s", name, sel.Sel.Name)
				}
			}
		})
	}
}

// TestOnlyTheDeskDrawsWindows: Fyne is imported by app/desk and cmd/cordwalk alone.
func TestOnlyTheDeskDrawsWindows(t *testing.T) {
	for _, p := range packages(t) {
		if under(p.path, "app/desk", "cmd/cordwalk") {
			continue
		}
		for _, d := range p.deps {
			if strings.HasPrefix(d, "fyne.io/") {
				t.Errorf("%s depends on %s", p.path, d)
				break
			}
		}
	}
}

// TestPackageCommentsStandOnce: one file of each package carries its comment.
func TestPackageCommentsStandOnce(t *testing.T) {
	for _, p := range packages(t) {
		n := 0
		for _, f := range parsed(t, p.dir) {
			if f.Doc != nil {
				n++
			}
		}
		if n != 1 {
			t.Errorf("%s: %d files carry a package comment, want 1", p.path, n)
		}
	}
}

// TestCommandLineBuildsEverywhere builds cordwalk-cli without cgo for the systems it is for.
func TestCommandLineBuildsEverywhere(t *testing.T) {
	for _, system := range []string{"linux", "windows", "darwin"} {
		t.Run(system, func(t *testing.T) {
			cmd := exec.Command("go", "build", "-o", filepath.Join(t.TempDir(), "cordwalk-cli"), ".")
			arch := "amd64"
			if system == "darwin" {
				arch = "arm64"
			}
			if system == runtime.GOOS {
				arch = runtime.GOARCH
			}
			cmd.Env = append(os.Environ(), "CGO_ENABLED=0", "GOOS="+system, "GOARCH="+arch)
			if out, err := cmd.CombinedOutput(); err != nil {
				t.Fatalf("%v\n%s", err, out)
			}
		})
	}
}

// parsed returns the syntax of a folder's files, tests left out.
func parsed(t *testing.T, dir string) map[string]*ast.File {
	t.Helper()
	fset := token.NewFileSet()
	names, err := filepath.Glob(filepath.Join(dir, "*.go"))
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]*ast.File{}
	for _, n := range names {
		if strings.HasSuffix(n, "_test.go") {
			continue
		}
		f, err := parser.ParseFile(fset, n, nil, parser.ParseComments)
		if err != nil {
			t.Fatal(err)
		}
		out[n] = f
	}
	return out
}

func each(t *testing.T, dir string, visit func(name string, n ast.Node)) {
	t.Helper()
	for name, f := range parsed(t, dir) {
		ast.Inspect(f, func(n ast.Node) bool {
			if n != nil {
				visit(name, n)
			}
			return true
		})
	}
}
