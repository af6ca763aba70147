// Command cordwalk is the desktop program: a therapist records a weekly neurological exam of
// a dog or cat, sees what changed since last week, and prints the owner's sheet.
package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"

	"fyne.io/fyne/v2/app"
	"fyne.io/fyne/v2/lang"
	"github.com/alecthomas/kong"

	"cordwalk.example/cordwalk/app/desk"
	"cordwalk.example/cordwalk/app/desk/still"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
)

// version is set when a release is built.
var version = "development"

type options struct {
	Store   string           `help:"Folder of the practice. Without it: the one opened last, or the user's data folder." placeholder:"DIR"`
	KeyFile string           `help:"File with the key of the practice." placeholder:"FILE"`
	Demo    bool             `help:"Open the demo practice, whose animals are invented."`
	Version kong.VersionFlag `help:"Say the version and end."`
}

func main() {
	// A store that was not closed cleanly tries its index in a child of this program first.
	storage.ChildMain()
	os.Exit(run())
}

func run() int {
	path, err := view.SettingsPath()
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
	}
	settings, err := view.LoadSettings(path)
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
	}
	tag := settings.Language
	if tag == "" {
		tag = lang.SystemLocale().LanguageString() // English where there are no texts in it
	}
	if err := words.Use(tag); err != nil && settings.Language != "" {
		fmt.Fprintln(os.Stderr, err)
	}
	var o options
	parser := kong.Must(&o, kong.Name("cordwalk"), kong.Description(words.T("Records and compares neurological exams of dogs and cats. It supports and never replaces a licensed veterinarian.")),
		kong.Vars{"version": version})
	for _, f := range parser.Model.Flags {
		f.Help = words.Of(f.Help)
	}
	_, err = parser.Parse(os.Args[1:])
	parser.FatalIfErrorf(err)
	if err := display(); err != nil {
		fmt.Fprintln(os.Stderr, err)
		return 2
	}
	keeper := &desk.Keeper{KeyFile: o.KeyFile}
	if path != "" {
		keeper.Config = filepath.Dir(path)
	}
	program := desk.New(still.App(app.NewWithID("example.cordwalk")), keeper, settings, path, nil)
	if o.Demo {
		program.StartDemo(o.Store)
	} else {
		program.Start(o.Store)
	}
	program.Run()
	if err := program.Done(); err != nil {
		fmt.Fprintln(os.Stderr, err)
		return 1
	}
	return 0
}

// display says in a sentence that there is no screen to draw on, where that can be known before
// the window is asked for.
func display() error {
	if runtime.GOOS == "linux" && os.Getenv("DISPLAY") == "" && os.Getenv("WAYLAND_DISPLAY") == "" {
		return errors.New(words.T("There is no display to open a window on. “make demo” shows Cordwalk at work without one; cordwalk-cli does everything the window does."))
	}
	return nil
}
