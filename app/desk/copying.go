package desk

import (
	"bytes"
	"context"
	"os"
	"os/exec"
	"runtime"
	"time"

	"cordwalk.example/cordwalk/assets/words"
)

// copyWait is how long a clipboard program may take.
const copyWait = 10 * time.Second

// clipboardTool names the program that puts a PNG picture on the clipboard of this session: the toolkit's own
// clipboard takes text alone. It is empty where there is none.
func clipboardTool() []string {
	if runtime.GOOS != "linux" {
		return nil
	}
	for _, t := range []struct {
		session string
		command []string
	}{
		{"WAYLAND_DISPLAY", []string{"wl-copy", "--type", "image/png"}},
		{"DISPLAY", []string{"xclip", "-selection", "clipboard", "-target", "image/png", "-in"}},
	} {
		if os.Getenv(t.session) == "" {
			continue
		}
		if _, err := exec.LookPath(t.command[0]); err == nil {
			return t.command
		}
	}
	return nil
}

// copyPicture puts a picture on the clipboard: as PNG by the session's clipboard program, or else as the text of
// an SVG file, which drawing programs paste, and says which.
func (w *window) copyPicture(picture func(svg bool) ([]byte, error)) {
	tool := clipboardTool()
	w.app.work(func(ctx context.Context) (func(), error) {
		data, err := picture(len(tool) == 0)
		if err != nil {
			return nil, err
		}
		if len(tool) == 0 {
			return func() {
				w.app.fyne.Clipboard().SetContent(string(data))
				w.foot.say(words.T("Copied as the text of an SVG file, which drawing programs paste. To copy a picture, install wl-clipboard or xclip."))
			}, nil
		}
		ctx, end := context.WithTimeout(ctx, copyWait)
		defer end()
		c := exec.CommandContext(ctx, tool[0], tool[1:]...)
		c.Stdin = bytes.NewReader(data)
		if err := c.Run(); err != nil {
			return nil, err
		}
		return func() { w.foot.say(words.T("The picture is on the clipboard.")) }, nil
	}, func(err error) {
		w.fail(words.T("The picture could not be copied. “Save picture” writes it to a file."), err)
	})
}
