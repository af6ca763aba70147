package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/testscript"

	"cordwalk.example/cordwalk/storage"
)

func TestMain(m *testing.M) {
	storage.ChildMain()
	testscript.Main(m, map[string]func(){"cordwalk-cli": main})
}

// TestScripts runs every script of testdata. Beside the usual words they know
//
//	exitcode N args…     runs cordwalk-cli and wants that exit code
//	until args…          runs cordwalk-cli until it ends with 0, ten seconds at most
//	jsonget VAR PATH     puts a value out of the JSON last printed into a variable
//	flip FILE OFFSET     turns one bit of a file; a negative offset counts from its end
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir: "testdata",
		Setup: func(e *testscript.Env) error {
			e.Setenv("HOME", e.WorkDir)
			e.Setenv("XDG_CONFIG_HOME", filepath.Join(e.WorkDir, "config"))
			e.Setenv("CORDWALK_STORE", "")
			e.Setenv("CORDWALK_PASSPHRASE_FILE", "")
			return nil
		},
		Cmds: map[string]func(ts *testscript.TestScript, neg bool, args []string){
			"exitcode": func(ts *testscript.TestScript, neg bool, args []string) {
				want, err := strconv.Atoi(args[0])
				ts.Check(err)
				err = ts.Exec("cordwalk-cli", args[1:]...)
				got := 0
				if err != nil {
					s := err.Error()
					got, err = strconv.Atoi(s[strings.LastIndexByte(s, ' ')+1:])
					ts.Check(err)
				}
				if got != want {
					ts.Fatalf("exit code %d, want %d", got, want)
				}
			},
			// until runs cordwalk-cli again and again, ten seconds at most, until it says 0.
			"until": func(ts *testscript.TestScript, neg bool, args []string) {
				end := time.Now().Add(10 * time.Second)
				for {
					err := ts.Exec("cordwalk-cli", args...)
					if err == nil {
						return
					}
					if time.Now().After(end) {
						ts.Fatalf("still %v", err)
					}
					time.Sleep(50 * time.Millisecond)
				}
			},
			"jsonget": func(ts *testscript.TestScript, neg bool, args []string) {
				var v any
				ts.Check(json.Unmarshal([]byte(ts.ReadFile("stdout")), &v))
				for _, part := range strings.Split(args[1], ".") {
					switch x := v.(type) {
					case map[string]any:
						v = x[part]
					case []any:
						n, err := strconv.Atoi(part)
						ts.Check(err)
						if n < 0 {
							n += len(x)
						}
						if n < 0 || n >= len(x) {
							ts.Fatalf("%s: there are %d", args[1], len(x))
						}
						v = x[n]
					default:
						ts.Fatalf("%s: nothing is at %q", args[1], part)
					}
				}
				if v == nil {
					ts.Fatalf("%s is not there", args[1])
				}
				if f, ok := v.(float64); ok {
					v = strconv.FormatFloat(f, 'g', -1, 64)
				}
				ts.Setenv(args[0], fmt.Sprint(v))
			},
			"flip": func(ts *testscript.TestScript, neg bool, args []string) {
				matches, err := filepath.Glob(ts.MkAbs(args[0]))
				ts.Check(err)
				if len(matches) == 0 {
					ts.Fatalf("no file %s", args[0])
				}
				name := matches[len(matches)-1]
				data, err := os.ReadFile(name)
				ts.Check(err)
				at, err := strconv.Atoi(args[1])
				ts.Check(err)
				if at < 0 {
					at += len(bytes.TrimRight(data, "\x00"))
				}
				data[at] ^= 4
				ts.Check(os.WriteFile(name, data, 0o600))
			},
			"same": func(ts *testscript.TestScript, neg bool, args []string) {
				a, b := ts.ReadFile(args[0]), ts.ReadFile(args[1])
				if (a == b) == neg {
					ts.Fatalf("%s and %s: equal is %v", args[0], args[1], a == b)
				}
			},
		},
	})
}
