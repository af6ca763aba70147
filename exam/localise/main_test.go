package localise

import (
	"flag"
	"os"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// TestMain runs fewer random exams than rapid's hundred unless the long counts are asked for.
func TestMain(m *testing.M) {
	flag.Parse()
	set := false
	flag.Visit(func(f *flag.Flag) { set = set || f.Name == "rapid.checks" })
	if !set {
		n := "30"
		if os.Getenv("CORDWALK_SOAK") == "1" {
			n = "600"
		}
		if err := flag.Set("rapid.checks", n); err != nil {
			panic(err)
		}
	}
	os.Exit(m.Run())
}

// mustFind is the cell of a key, or −1.
func mustFind(l *layout, k exam.Key) int {
	if i, ok := l.find(k); ok {
		return i
	}
	return -1
}
