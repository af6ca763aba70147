package desk

import (
	"context"

	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
)

// askErase asks before a patient's owner is erased at the owner's request, and why. It cannot be undone.
func (w *window) askErase(patient exam.Patient) {
	r, ok := w.app.records.(stored)
	if !ok {
		return
	}
	w.ask(asking{
		title: words.T("Erase the owner's data of %s", patient.Name),
		about: mark.NewPara(words.T("Name, telephone and e-mail of the owner, and all photos and clips of this animal, are destroyed here and on each other device at its next exchange. Nobody can bring them back. The exams stay. Backups made before still hold them; the Devices page names those.")),
		hint:  words.T("Who asked, and how, such as: the owner, by letter"), missing: words.T("Say why; it is kept."),
		width: 640, does: words.T("Erase for good"), icon: "close",
		then: func(why string) {
			who := w.app.examiner
			w.app.work(func(ctx context.Context) (func(), error) {
				if err := w.app.saver.Flush(ctx); err != nil {
					return nil, err
				}
				f, err := w.app.album.files(ctx, r.Store())
				if err != nil {
					return nil, err
				}
				return func() {
					w.goTo(view.Route{Screen: view.ScreenPatient, Patient: patient.ID})
					w.foot.say(words.T("The owner's data are erased here, and on each other device at its next exchange."))
				}, f.Erase(ctx, who, patient.ID, why)
			}, func(err error) { w.fail(words.T("The owner's data could not be erased."), err) })
		},
	})
}
