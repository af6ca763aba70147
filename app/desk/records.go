package desk

import (
	"context"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// Records is what the desktop needs of the store, and no more. Every call may take long and
// is made off the drawing goroutine, except those that say they do not.
type Records interface {
	Practice() (exam.Practice, error)
	Caseload(ctx context.Context) ([]view.Summary, error)
	File(id exam.ID) (File, error)

	SavePatient(ctx context.Context, examiner string, before, after exam.Patient) error
	SaveVisit(ctx context.Context, examiner string, before, after exam.Visit) error
	SaveBatch(ctx context.Context, examiner string, b view.Batch) error
	SavePractice(ctx context.Context, examiner string, before, after exam.Practice) error

	// Apply writes edits as one action; the import uses it.
	Apply(ctx context.Context, examiner string, edits ...storage.Edit) (storage.Receipt, error)

	NewID() exam.ID  // at once
	Protected() bool // at once: whether the key lies elsewhere than the data
	Device() string  // at once: this device's short name
	Place() string   // at once: the folder of the store
	Close() error
}

// File is everything on one patient.
type File struct {
	Patient  exam.Patient
	Visits   []exam.Visit // oldest first
	Missing  []string     // entries that are missing or unreadable, in words
	Conflict []string     // fields with two current values, in words
}

// visit returns a visit of the file, and false if it has no such one.
func (f File) visit(id exam.ID) (exam.Visit, bool) {
	for _, v := range f.Visits {
		if v.ID == id {
			return v, true
		}
	}
	return exam.Visit{}, false
}

// open returns the newest visit that is not closed, and false if there is none.
func (f File) open() (exam.Visit, bool) {
	for i := len(f.Visits) - 1; i >= 0; i-- {
		if f.Visits[i].State == exam.Open {
			return f.Visits[i], true
		}
	}
	return exam.Visit{}, false
}
