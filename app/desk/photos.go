package desk

import (
	"context"
	"errors"
	"fmt"
	"image"
	"io"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"sync"

	"filippo.io/age"
	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/dialog"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/app/view/picture"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	store "cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/attach"
	"cordwalk.example/cordwalk/sync/share"
)

// album holds what lies beside a store and is opened when it is first needed: the sealed files, and the list of devices.
type album struct {
	mu      sync.Mutex
	of      *store.Store
	open    *attach.Files
	devices *share.Share
}

// share opens the list of the practice's devices; not on the drawing goroutine. The first time it founds the practice:
// then it returns what belongs on the recovery sheet, perhaps beside an error.
func (a *album) share(ctx context.Context, s *store.Store) (*share.Share, *age.X25519Identity, error) {
	files, err := a.files(ctx, s)
	if err != nil {
		return nil, nil, err
	}
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.devices != nil {
		return a.devices, nil, nil
	}
	sh, recovery, err := share.Open(ctx, s, share.Options{})
	if err != nil {
		return nil, recovery, err
	}
	sh.Files, a.devices = files, sh
	return sh, recovery, nil
}

// files opens the sealed files of a store; not on the drawing goroutine.
func (a *album) files(ctx context.Context, s *store.Store) (*attach.Files, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.open != nil && a.of == s {
		return a.open, nil
	}
	f, err := attach.Open(ctx, s, nil)
	if err != nil {
		return nil, err
	}
	a.of, a.open, a.devices = s, f, nil
	return f, nil
}

// attachment opens the bytes of an attachment. The error is fs.ErrNotExist where they are not here yet.
func (a *App) attachment(ctx context.Context, patient exam.ID, x exam.Attachment) (io.ReadCloser, error) {
	s, ok := a.records.(stored)
	if !ok {
		return nil, fs.ErrNotExist
	}
	f, err := a.album.files(ctx, s.Store())
	if err != nil {
		return nil, err
	}
	r, err := f.Read(patient, x.Name)
	if errors.Is(err, attach.ErrNoKey) {
		return nil, fmt.Errorf("%w: %w", fs.ErrNotExist, err)
	}
	return r, err
}

// keepFile checks and cleans a file, and keeps what may be kept. It is durable when keepFile returns.
func (a *App) keepFile(ctx context.Context, patient exam.ID, name string) (exam.Attachment, error) {
	var out exam.Attachment
	s, ok := a.records.(stored)
	if !ok {
		return out, errors.New(words.T("this practice keeps no photos"))
	}
	in, err := os.Open(name)
	if err != nil {
		return out, err
	}
	defer in.Close()
	info, err := in.Stat()
	if err != nil {
		return out, err
	}
	c, err := picture.Clean(in, info.Size())
	if err != nil {
		return out, fmt.Errorf("%s: %w", filepath.Base(name), err)
	}
	f, err := a.album.files(ctx, s.Store())
	if err != nil {
		return out, err
	}
	sealed, err := f.Add(ctx, patient, c.Reader)
	if err != nil {
		return out, err
	}
	return exam.Attachment{ID: a.records.NewID(), Name: sealed, Format: c.Format, Size: c.Size}, nil
}

// thumbMost is the side of the pictures that are kept to be looked at, in pixels.
const thumbMost = 900

// newPhoto shows one attachment, small; pressing it shows it large.
func newPhoto(w *window, v exam.Visit, at int, wide, high float32) fyne.CanvasObject {
	x := v.Attachments[at]
	img := &canvas.Image{FillMode: canvas.ImageFillContain}
	say := mark.NewPara(words.T("Opening…")).In(look.InkSoft)
	inner := mark.On(look.Sunk, true, mark.Sized(wide, high, &fyne.Container{Layout: stackFill{}, Objects: []fyne.CanvasObject{img, mark.Pad(look.Unit, look.Unit, say)}}))
	tip := view.AttachmentWords(x)
	if x.Note != "" {
		tip += " · " + x.Note
	}
	play := iconImage("play", look.Ink, 44)
	play.Hide()
	if !x.Photo() {
		inner = mark.On(look.Sunk, true, mark.Sized(wide, high, &fyne.Container{Layout: stackFill{}, Objects: []fyne.CanvasObject{img, center(play), mark.Pad(look.Unit, look.Unit, say)}}))
	}
	var shown image.Image
	o := newPressable(inner, tip, func() { showLarge(w, v, at, shown) })
	w.app.work(func(ctx context.Context) (func(), error) {
		small, note := w.app.thumb(ctx, v.Patient, x)
		return func() {
			shown = small
			if note != "" && !x.Photo() {
				// A clip whose first frame cannot be decoded is drawn by what is known of it.
				say.Set(view.Day(v.Examined) + "\n" + note)
				play.Show()
				img.Image = small
				img.Refresh()
				return
			}
			if small != nil {
				img.Image = small
				say.Set("")
				img.Refresh()
				return
			}
			say.Set(note)
		}, nil
	}, func(error) {})
	return o
}

// thumb is a small picture of an attachment, or what to say instead.
func (a *App) thumb(ctx context.Context, patient exam.ID, x exam.Attachment) (image.Image, string) {
	r, err := a.attachment(ctx, patient, x)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, words.T("not here yet: it comes with the next exchange")
	case errors.Is(err, attach.ErrErased):
		return nil, words.T("erased on request")
	case err != nil:
		return nil, words.T("cannot be read: %s", err.Error())
	}
	defer r.Close()
	if !x.Photo() {
		return a.poster(patient, x)
	}
	data, err := io.ReadAll(io.LimitReader(r, exam.MaxPhoto+1))
	if err == nil {
		var p image.Image
		if p, err = picture.Thumb(data, thumbMost, thumbMost); err == nil {
			return p, ""
		}
	}
	return nil, words.T("cannot be read: %s", err.Error())
}

// poster is the first frame of a clip where it can be decoded, and what is known of the clip.
func (a *App) poster(patient exam.ID, x exam.Attachment) (image.Image, string) {
	s, ok := a.records.(stored)
	if !ok {
		return nil, view.AttachmentWords(x)
	}
	f, err := a.album.files(a.ctx, s.Store())
	if err != nil {
		return nil, words.T("cannot be read: %s", err.Error())
	}
	r, size, in, err := f.At(patient, x.Name)
	if err != nil {
		return nil, words.T("cannot be read: %s", err.Error())
	}
	defer in.Close()
	c, err := picture.Describe(r, size, thumbMost, thumbMost)
	if err != nil {
		return nil, view.AttachmentWords(x)
	}
	return c.First, view.ClipWords(x, c.Length)
}

// play opens a clip in the system's player. The player needs a file that is not sealed: it lies in a folder
// that only this user can open, until the program ends.
func (w *window) play(v exam.Visit, at int) {
	x := v.Attachments[at]
	w.app.work(func(ctx context.Context) (func(), error) {
		r, err := w.app.attachment(ctx, v.Patient, x)
		if err != nil {
			return nil, err
		}
		defer r.Close()
		dir, err := os.MkdirTemp("", "cordwalk-play-")
		if err != nil {
			return nil, err
		}
		w.app.unsealed.add(dir)
		name := filepath.Join(dir, view.AttachmentFile(v, at))
		out, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
		if err != nil {
			return nil, err
		}
		_, err = io.Copy(out, r)
		if err = errors.Join(err, out.Close()); err != nil {
			return nil, err
		}
		return func() {
			if err := w.app.fyne.OpenURL(&url.URL{Scheme: "file", Path: name}); err != nil {
				w.fail(words.T("No player could be opened. “Save a copy” writes the clip to a file."), err)
				return
			}
			w.foot.say(words.T("Opened in the player. The copy it plays is not sealed; it goes when Cordwalk ends."))
		}, nil
	}, func(err error) { w.fail(words.T("The clip could not be opened."), err) })
}

// unsealed are the folders with copies for other programs.
type unsealed struct {
	mu   sync.Mutex
	dirs []string
}

func (u *unsealed) add(dir string) {
	u.mu.Lock()
	defer u.mu.Unlock()
	u.dirs = append(u.dirs, dir)
}

// remove takes the copies away.
func (u *unsealed) remove() error {
	u.mu.Lock()
	defer u.mu.Unlock()
	var err error
	for _, d := range u.dirs {
		err = errors.Join(err, os.RemoveAll(d))
	}
	u.dirs = nil
	return err
}

// showLarge shows an attachment over the page, with what it is and a way to keep a copy outside.
func showLarge(w *window, v exam.Visit, at int, shown image.Image) {
	x := v.Attachments[at]
	lines := []fyne.CanvasObject{}
	if shown != nil {
		img := canvas.NewImageFromImage(shown)
		img.FillMode = canvas.ImageFillContain
		lines = append(lines, mark.Sized(760, min(560, w.win.Canvas().Size().Height*0.6), img))
	}
	if x.Note != "" {
		lines = append(lines, mark.NewPara(x.Note).Strong())
	}
	lines = append(lines, mark.NewPara(words.T("%s: %s", view.Day(v.Examined), view.AttachmentWords(x))).In(look.InkSoft))
	save := mark.NewButton(words.T("Save a copy"), "save", func() { w.hideSheet(); w.saveCopy(v, at) })
	buttons := []fyne.CanvasObject{save}
	if !x.Photo() {
		buttons = []fyne.CanvasObject{save, mark.NewButton(words.T("Play"), "play", func() { w.hideSheet(); w.play(v, at) }).As(mark.Main)}
	}
	w.showSheet(words.T("Photo or clip"), mark.Column(look.Unit, lines...), 820, buttons...)
}

// saveCopy writes an attachment unsealed to a file that the person names.
func (w *window) saveCopy(v exam.Visit, at int) {
	x := v.Attachments[at]
	d := dialog.NewFileSave(func(out fyne.URIWriteCloser, err error) {
		if err != nil || out == nil {
			if err != nil {
				w.fail(words.T("The copy could not be written."), err)
			}
			return
		}
		told := w.exported(view.AttachmentFile(v, at))
		w.app.work(func(ctx context.Context) (func(), error) {
			r, err := w.app.attachment(ctx, v.Patient, x)
			if err != nil {
				return nil, errors.Join(err, out.Close())
			}
			defer r.Close()
			_, err = io.Copy(out, r)
			if err = errors.Join(err, out.Close()); err != nil {
				return nil, err
			}
			if err := told(ctx); err != nil {
				return nil, err
			}
			return func() { w.foot.say(words.T("A copy lies in %s. It is not sealed there.", out.URI().Path())) }, nil
		}, func(err error) { w.fail(words.T("The copy could not be written."), err) })
	}, w.win)
	d.SetFileName(view.AttachmentFile(v, at))
	d.Show()
}

// stackFill lays things over each other, each over the whole.
type stackFill struct{}

func (stackFill) MinSize([]fyne.CanvasObject) fyne.Size { return fyne.Size{} }
func (stackFill) Layout(o []fyne.CanvasObject, s fyne.Size) {
	for _, x := range o {
		x.Move(fyne.NewPos(0, 0))
		x.Resize(s)
	}
}

// newPhotosForm is the part of a visit with its photos and clips.
func newPhotosForm(p *examPage) fyne.CanvasObject {
	v := p.sheet.Visit()
	add := mark.NewButton(words.T("Add a photo or clip"), "camera", p.pickPhoto).As(mark.Main)
	parts := []fyne.CanvasObject{mark.NewPara(words.T("Photos and clips of this visit")).As(look.Head).Strong(), mark.Rule(),
		mark.NewPara(words.T("Drop files here, or choose them. JPEG and PNG photos of up to 25 MB, MP4, MOV and WebM clips of up to 200 MB. What tells where they were taken is removed; the files are kept sealed.")).In(look.InkSoft),
		mark.Left(add)}
	if len(v.Attachments) == 0 {
		parts = append(parts, mark.NewPara(words.T("None yet.")).In(look.InkSoft))
	}
	for i, x := range v.Attachments {
		at := x
		remove := mark.NewButton(words.T("Remove"), "close", func() {
			p.edit(func(v *exam.Visit) {
				var out []exam.Attachment
				for _, y := range v.Attachments {
					if y.ID != at.ID {
						out = append(out, y)
					}
				}
				v.Attachments = out
			})
			p.choose(tabPhotos)
		}).As(mark.Quiet).WithTip(words.T("Undo brings it back."))
		note := mark.NewLabelled(words.T("What it shows"), p.typedText(x.Note, 1, func(v *exam.Visit, s string) {
			for j := range v.Attachments {
				if v.Attachments[j].ID == at.ID {
					v.Attachments[j].Note = s
				}
			}
		}).Hint(words.T("walking, from behind")))
		parts = append(parts, mark.RowTop(look.Unit*2, []float32{0, 1}, newPhoto(p.win, v, i, 200, 150),
			mark.Column(look.Unit, note, mark.Row(look.Unit, []float32{1, 0}, mark.NewPara(view.AttachmentWords(x)).In(look.InkSoft), remove))), mark.Rule())
	}
	return mark.NewScroll(mark.Pad(look.Unit, look.Unit, mark.Column(look.Unit*1.5, parts...)))
}

func (p *examPage) pickPhoto() {
	p.win.pickFile(words.T("The file cannot be opened."), []string{".jpg", ".jpeg", ".JPG", ".JPEG", ".png", ".PNG", ".mp4", ".MP4", ".mov", ".MOV", ".m4v", ".webm"},
		func(path string) { p.addPhotos([]string{path}) }).Show()
}

// dropped takes files that were dragged into the window.
func (p *examPage) dropped(files []fyne.URI) {
	if p.sheet == nil {
		return
	}
	var names []string
	for _, f := range files {
		if f.Scheme() == "file" {
			names = append(names, f.Path())
		}
	}
	p.addPhotos(names)
}

// addPhotos keeps files with the visit. Each is sealed and on the disk before the visit names it.
func (p *examPage) addPhotos(names []string) {
	if len(names) == 0 {
		return
	}
	if _, amending := p.sheet.Amending(); p.sheet.Closed() && !amending {
		p.win.foot.fail(words.T("The visit is closed: press Amend first and say why."), nil)
		return
	}
	a := p.win.app
	patient := p.sheet.Visit().Patient
	p.win.foot.say(words.N(len(names), "Sealing %d file…", "Sealing %d files…", len(names)))
	a.work(func(ctx context.Context) (func(), error) {
		var kept []exam.Attachment
		var bad error
		for _, n := range names {
			x, err := a.keepFile(ctx, patient, n)
			if err != nil {
				bad = errors.Join(bad, err)
				continue
			}
			kept = append(kept, x)
		}
		return func() {
			if len(kept) > 0 {
				p.edit(func(v *exam.Visit) { v.Attachments = append(v.Attachments, kept...) })
				p.win.foot.say(words.N(len(kept), "%d file kept with this visit", "%d files kept with this visit", len(kept)))
				if p.win.page == page(p) {
					p.choose(tabPhotos)
				}
			}
			if bad != nil {
				p.win.foot.fail(words.T("Not every file was taken: %s", strings.ReplaceAll(bad.Error(), "\n", "; ")), bad)
			}
		}, nil
	}, func(err error) { p.win.fail(words.T("The files could not be kept."), err) })
}

// newPhotosBeside sets the photos of two visits side by side; nil where neither has any.
func newPhotosBeside(w *window, a, b exam.Visit) fyne.CanvasObject {
	if len(a.Attachments)+len(b.Attachments) == 0 {
		return nil
	}
	side := func(v exam.Visit) fyne.CanvasObject {
		parts := []fyne.CanvasObject{mark.NewPara(view.Day(v.Examined)).In(look.InkSoft)}
		for i, x := range v.Attachments {
			parts = append(parts, newPhoto(w, v, i, 300, 225))
			if x.Note != "" {
				parts = append(parts, mark.NewPara(x.Note))
			}
		}
		if len(v.Attachments) == 0 {
			parts = append(parts, mark.NewPara(words.T("no photos")).In(look.InkSoft))
		}
		return mark.Column(look.Unit, parts...)
	}
	return mark.Column(look.Unit, mark.Pad(look.Unit, 0, mark.Heading(words.T("Photos and clips")).AtLeast(60)), mark.Rule(),
		mark.RowTop(look.Unit*2, []float32{1, 1}, side(a), side(b)))
}
