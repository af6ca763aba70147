package main

import (
	"fmt"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/storage"
)

// initCmd makes a new practice.
type initCmd struct {
	Practice string `required:"" help:"Name of the practice." placeholder:"NAME"`
	Examiner string `required:"" help:"Who examines." placeholder:"NAME"`
	Phone    string `help:"Telephone of the practice."`
	Zone     string `help:"Time zone, such as Europe/Berlin." default:"UTC"`
	Paper    string `help:"Paper of the sheets." enum:"A4,Letter" default:"A4"`
}

func (c *initCmd) Run(e *env) error {
	dir, err := e.storeDir()
	if err != nil {
		return err
	}
	if !isNew(dir) {
		return fmt.Errorf("%s", words.T("%s is not empty; a new practice needs a new folder", dir))
	}
	if _, err := time.LoadLocation(c.Zone); err != nil {
		return usage("%s", words.T("%q is no time zone; use one such as Europe/Berlin", c.Zone))
	}
	s, err := e.openOrCreate()
	if err != nil {
		return err
	}
	return closing(s, func(s *storage.Store) error {
		p := exam.Practice{Name: c.Practice, Contact: exam.Contact{Name: c.Practice, Phone: c.Phone}, Zone: c.Zone, Paper: c.Paper,
			Language:  words.Language(),
			Examiners: []exam.Examiner{{ID: storage.NewID(), Name: c.Examiner, Initials: view.Initials(c.Examiner)}}}
		if _, err := s.Apply(e.ctx, c.Examiner, storage.PracticeEdits(exam.Practice{}, p)...); err != nil {
			return err
		}
		e.say("%s", words.T("Practice %s made in %s", c.Practice, dir))
		if !s.Protected() {
			e.say("%s", words.T("Not protected: whoever has the folder can read it."))
		}
		return nil
	})
}

// patientsCmd lists the caseload.
type patientsCmd struct {
	Search string `help:"Only those whose name, owner, breed or problem fits." placeholder:"WORDS"`
	Today  bool   `help:"Only those with an alert, an unfinished exam, overdue or due today."`
}

// patientLine is a patient in JSON lists.
type patientLine struct {
	ID        exam.ID     `json:"id"`
	Name      string      `json:"name"`
	Species   string      `json:"species"`
	Breed     string      `json:"breed,omitempty"`
	Owner     string      `json:"owner,omitempty"`
	Problem   string      `json:"problem,omitempty"`
	Status    string      `json:"status"`
	Demo      bool        `json:"demo,omitempty"`
	Visits    int         `json:"visits"`
	First     *time.Time  `json:"first,omitempty"`
	Last      *time.Time  `json:"last,omitempty"`
	LastVisit *exam.ID    `json:"last_visit,omitempty"`
	OpenVisit *exam.ID    `json:"open_visit,omitempty"`
	DueDays   *int        `json:"due_days,omitempty"` // negative: overdue
	Due       string      `json:"due"`
	Direction string      `json:"direction"`
	Motor     []*int8     `json:"voluntary_motor"` // thoracic-left, thoracic-right, pelvic-left, pelvic-right
	Alerts    []lineAlert `json:"alerts"`
}

type lineAlert struct {
	Rule     string `json:"rule"`
	Urgency  string `json:"urgency"`
	Answered bool   `json:"answered"`
}

func lineOf(r view.CaseRow) patientLine {
	s := r.Summary
	l := patientLine{ID: s.ID, Name: s.Name, Species: s.Species.String(), Breed: s.Breed, Owner: s.Owner, Problem: s.Problem,
		Status: s.Status.String(), Demo: s.Demo, Visits: s.Visits, Due: r.DueWords, Direction: s.Direction.String(), Alerts: []lineAlert{}}
	if s.Visits > 0 {
		l.First, l.Last, l.LastVisit = &s.First, &s.Last, &s.LastVisit
	}
	if !s.OpenVisit.IsZero() {
		l.OpenVisit = &s.OpenVisit
	}
	if r.Attention != view.NeverDue {
		l.DueDays = &r.Days
	}
	for _, g := range s.Motor {
		if g < 0 {
			l.Motor = append(l.Motor, nil)
		} else {
			l.Motor = append(l.Motor, &g)
		}
	}
	for _, a := range s.Alerts {
		l.Alerts = append(l.Alerts, lineAlert(a))
	}
	return l
}

func (c *patientsCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		list, err := s.Caseload(e.ctx)
		if err != nil {
			return err
		}
		cases := view.NewCaseload(list, time.Now())
		cases.OnlyToday(c.Today)
		cases.Search(c.Search)
		if e.c.JSON {
			out := struct {
				Patients []patientLine `json:"patients"`
			}{[]patientLine{}}
			for _, r := range cases.Rows() {
				out.Patients = append(out.Patients, lineOf(r))
			}
			return e.printLarge(out)
		}
		e.protection(s)
		w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
		fmt.Fprintln(w, strings.Join([]string{words.T("Name"), words.T("Species"), words.T("Problem"), words.T("Limbs"), words.T("Last visit"), words.T("Change"), words.T("Due"), words.T("Alerts"), words.T("Id")}, "\t"))
		for _, r := range cases.Rows() {
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\n", r.Summary.Name, view.SpeciesName(r.Summary.Species), clip(r.Summary.Problem, 34),
				limbWords(r.Summary.Motor), shortDay(r.Summary.Last), r.Change.Word, r.DueWords, strings.Join(r.Alerts, ", "), r.Summary.ID)
		}
		if err := w.Flush(); err != nil {
			return err
		}
		e.say("%s", cases.Words())
		return nil
	})
}

// protection says on top of what is printed that the data are not protected, or a demo.
func (e *env) protection(s *storage.Store) {
	if p, err := s.Practice(); err == nil && p.Demo {
		e.say("%s", words.T("Demo practice: every animal and person is invented."))
	}
	if !s.Protected() {
		e.say("%s", words.T("Not protected: the key lies beside the data."))
	}
}

// limbWords prints the voluntary movement of the limbs: front left, front right, hind left,
// hind right, a dot where not tested.
func limbWords(g [4]int8) string {
	out := make([]string, 4)
	for i, x := range g {
		out[i] = "·"
		if x >= 0 {
			out[i] = fmt.Sprint(x)
		}
	}
	return out[0] + out[1] + "/" + out[2] + out[3]
}

func clip(s string, n int) string {
	if r := []rune(s); len(r) > n {
		return string(r[:n-1]) + "…"
	}
	return s
}

// patientFields are what can be on file of a patient.
type patientFields struct {
	Breed      string   `help:"Breed."`
	Sex        string   `help:"female, male or unknown."`
	Neutered   *bool    `negatable:"" help:"Neutered."`
	Born       string   `help:"Birth: 2019-05-07, 2019-05 or 2019." placeholder:"DATE"`
	Owner      string   `help:"Owner's name."`
	OwnerPhone string   `help:"Owner's telephone."`
	OwnerEmail string   `help:"Owner's e-mail."`
	Vet        string   `help:"Treating veterinarian."`
	VetPhone   string   `help:"Treating veterinarian's telephone."`
	Night      string   `help:"Whom to call at night."`
	NightPhone string   `help:"Telephone at night."`
	Recheck    string   `help:"Days between visits." placeholder:"DAYS"`
	Problem    string   `help:"Diagnosis on file."`
	Level      string   `help:"Vertebral level of the problem, such as T12-T13."`
	Side       string   `help:"Side of the problem." enum:",left,right" default:""`
	Onset      string   `help:"Onset of the problem." placeholder:"DATE"`
	Surgery    string   `help:"Surgery." placeholder:"DATE"`
	Precaution []string `help:"Precaution, as CODE, CODE@SITE or CODE@SITE@UNTIL; may be repeated."`
	Note       string   `help:"Note."`
	Examiner   string   `help:"Who makes the change; the practice's first examiner where not said."`
}

// fill puts the fields into a form.
func (c *patientFields) fill(f *view.PatientForm) error {
	set := func(to *string, from string) {
		if from != "" {
			*to = from
		}
	}
	set(&f.Breed, c.Breed)
	set(&f.Sex, c.Sex)
	if c.Neutered != nil {
		f.Neutered = *c.Neutered
	}
	set(&f.Born, c.Born)
	set(&f.OwnerName, c.Owner)
	set(&f.OwnerPhone, c.OwnerPhone)
	set(&f.OwnerEmail, c.OwnerEmail)
	set(&f.VetName, c.Vet)
	set(&f.VetPhone, c.VetPhone)
	set(&f.NightName, c.Night)
	set(&f.NightPhone, c.NightPhone)
	set(&f.RecheckDays, c.Recheck)
	set(&f.Note, c.Note)
	if c.Problem+c.Level+c.Side+c.Onset+c.Surgery != "" {
		i := slices.IndexFunc(f.Problems, func(p exam.Problem) bool { return c.Problem == "" || strings.EqualFold(p.Diagnosis, c.Problem) })
		if i < 0 {
			f.Problems = append(f.Problems, exam.Problem{ID: storage.NewID(), Diagnosis: c.Problem})
			i = len(f.Problems) - 1
		}
		p := &f.Problems[i]
		set(&p.Level, c.Level)
		set(&p.Side, c.Side)
		if c.Onset != "" {
			p.Onset = exam.Date(c.Onset)
		}
		if c.Surgery != "" {
			p.Surgery = exam.Date(c.Surgery)
		}
	}
	for _, w := range c.Precaution {
		parts := strings.Split(w, "@")
		if len(parts) > 3 {
			return usage("%s", words.T("%q is no precaution; use CODE, CODE@SITE or CODE@SITE@UNTIL", w))
		}
		p := exam.PrecautionOn{ID: storage.NewID(), Code: parts[0], Since: exam.DayOf(time.Now())}
		if len(parts) > 1 && parts[1] != "" {
			site, err := exam.ParseSite(parts[1])
			if err != nil {
				return err
			}
			p.Site = site.String()
		}
		if len(parts) > 2 {
			p.Until = exam.Date(parts[2])
		}
		f.Precautions = append(f.Precautions, p)
	}
	return nil
}

// complain turns a form's problems into one error.
func complain(bad view.Problems) error {
	var list []string
	for field, why := range bad {
		list = append(list, field+": "+why)
	}
	slices.Sort(list)
	return fmt.Errorf("%s", strings.Join(list, "; "))
}

// patientAddCmd adds a patient.
type patientAddCmd struct {
	Name    string `arg:"" help:"Name of the animal."`
	Species string `help:"dog, cat, horse or rabbit." default:"dog"`
	ID      string `help:"Id to give it; adding the same id twice adds it once." placeholder:"UUID"`
	patientFields
}

func (c *patientAddCmd) Run(e *env) error {
	f := view.NewPatientForm(exam.Patient{})
	f.Name, f.Species = c.Name, c.Species
	if err := c.fill(f); err != nil {
		return err
	}
	p, bad := f.Patient()
	if bad.Any() {
		return complain(bad)
	}
	p.ID = storage.NewID()
	if c.ID != "" {
		id, err := exam.ParseID(strings.ToLower(c.ID))
		if err != nil {
			return err
		}
		p.ID = id
	}
	s, err := e.openOrCreate()
	if err != nil {
		return err
	}
	return closing(s, func(s *storage.Store) error {
		if had, err := s.Patient(p.ID); err == nil {
			if had.Patient.Name != p.Name {
				return fmt.Errorf("%s", words.T("the id %s is that of %s already", p.ID, had.Patient.Name))
			}
			return e.added("patient", p.ID, false)
		}
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		if _, err := s.Apply(e.ctx, who, storage.PatientEdits(exam.Patient{}, p)...); err != nil {
			return err
		}
		return e.added("patient", p.ID, true)
	})
}

// added prints the id of what was added, once it is durable.
func (e *env) added(what string, id exam.ID, isNew bool) error {
	if e.c.JSON {
		return e.printJSON(map[string]any{what: id, "added": isNew})
	}
	e.say("%s", id)
	if !isNew {
		e.warn(words.T("It was there already; nothing was added."))
	}
	return nil
}

// patientSetCmd changes a patient.
type patientSetCmd struct {
	Patient string `arg:"" help:"Id or name of the patient."`
	Name    string `help:"New name."`
	Status  string `help:"active, discharged or died." enum:",active,discharged,died" default:""`
	patientFields
}

func (c *patientSetCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		f := view.NewPatientForm(r.Patient)
		if c.Name != "" {
			f.Name = c.Name
		}
		if c.Status != "" && c.Status != f.Status {
			f.Status, f.StatusSince = c.Status, string(exam.DayOf(time.Now()))
		}
		if err := c.fill(f); err != nil {
			return err
		}
		p, bad := f.Patient()
		if bad.Any() {
			return complain(bad)
		}
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		edits := storage.PatientEdits(r.Patient, p)
		if _, err := s.Apply(e.ctx, who, edits...); err != nil {
			return err
		}
		e.say("%s", words.N(len(edits), "%d field changed", "%d fields changed", len(edits)))
		return nil
	})
}

// patientShowCmd shows a patient.
type patientShowCmd struct {
	Patient string `arg:"" help:"Id or name of the patient."`
}

// patientJSON is a patient with its visits in JSON.
type patientJSON struct {
	ID           exam.ID             `json:"id"`
	Joined       []exam.ID           `json:"joined,omitempty"`
	Name         string              `json:"name"`
	Species      string              `json:"species"`
	Breed        string              `json:"breed,omitempty"`
	Sex          string              `json:"sex"`
	Neutered     bool                `json:"neutered"`
	Born         exam.Date           `json:"born,omitempty"`
	Owner        exam.Contact        `json:"owner"`
	Veterinarian exam.Contact        `json:"veterinarian"`
	OutOfHours   exam.Contact        `json:"out_of_hours"`
	Referral     exam.Referral       `json:"referral"`
	Status       string              `json:"status"`
	StatusSince  exam.Date           `json:"status_since,omitempty"`
	RecheckDays  int                 `json:"recheck_days,omitempty"`
	Problems     []exam.Problem      `json:"problems"`
	Precautions  []exam.PrecautionOn `json:"precautions"`
	Goals        []exam.Goal         `json:"goals"`
	Medicines    []exam.Medicine     `json:"medicines"`
	Weights      []exam.WeightPoint  `json:"weights"`
	Note         string              `json:"note,omitempty"`
	Demo         bool                `json:"demo,omitempty"`
	Visits       []visitLine         `json:"visits"`
	Conflicts    int                 `json:"conflicts"`
	Missing      []string            `json:"missing"`
	Sent         []sentJSON          `json:"sent"`
}

type visitLine struct {
	ID       exam.ID   `json:"id"`
	Examined time.Time `json:"examined"`
	Examiner string    `json:"examiner"`
	Protocol string    `json:"protocol,omitempty"`
	Closed   bool      `json:"closed"`
	Findings int       `json:"findings"`
	Tested   int       `json:"tested"`
	Abnormal int       `json:"abnormal"`
	Measures int       `json:"measures"`
}

func visitLineOf(v exam.Visit) visitLine {
	l := visitLine{ID: v.ID, Examined: v.Examined, Examiner: v.Examiner, Protocol: v.Protocol, Closed: v.State == exam.Closed,
		Findings: len(v.Findings), Measures: len(v.Measures)}
	for _, f := range v.Findings {
		if f.Result.Tested() {
			l.Tested++
		}
		if f.Abnormal() {
			l.Abnormal++
		}
	}
	return l
}

func gaps(r storage.Record) []string {
	out := []string{}
	for _, g := range r.Missing {
		out = append(out, g.String())
	}
	return out
}

func (c *patientShowCmd) Run(e *env) error {
	return e.with(func(s *storage.Store) error {
		r, err := e.patient(s, c.Patient)
		if err != nil {
			return err
		}
		e.looked(s, r.Patient.ID)
		return e.show(s, r)
	})
}

// show prints a patient with its visits.
func (e *env) show(s *storage.Store, r storage.Record) error {
	p := r.Patient
	if e.c.JSON {
		out := patientJSON{ID: p.ID, Name: p.Name, Species: p.Species.String(), Breed: p.Breed, Sex: p.Sex.String(), Neutered: p.Neutered,
			Born: p.Born, Owner: p.Owner, Veterinarian: p.Veterinarian, OutOfHours: p.OutOfHours, Referral: p.Referral,
			Status: p.Status.String(), StatusSince: p.StatusSince, RecheckDays: p.RecheckDays, Problems: some(p.Problems),
			Precautions: some(p.Precautions), Goals: some(p.Goals), Medicines: some(p.Medicines), Weights: some(p.Weights), Note: p.Note,
			Demo: p.Demo, Visits: []visitLine{}, Conflicts: len(r.Conflicts), Missing: gaps(r), Sent: sentLines(p)}
		if len(r.Joined) > 1 {
			out.Joined = r.Joined
		}
		for _, v := range r.Visits {
			out.Visits = append(out.Visits, visitLineOf(v))
		}
		return e.printJSON(out)
	}
	e.protection(s)
	st := view.StripOf(p, time.Now(), e.units(s))
	e.say("%s · %s · %s", p.Name, st.Species, st.Signalment)
	if st.Problem != "" {
		e.say("%s", words.T("Problem: %s", st.Problem))
	}
	for _, w := range st.Precautions {
		e.say("%s", words.T("Precaution: %s", w))
	}
	if p.Owner.Name != "" {
		e.say("%s", words.T("Owner: %s", contact(p.Owner)))
	}
	if !p.Veterinarian.Empty() {
		e.say("%s", words.T("Veterinarian: %s", contact(p.Veterinarian)))
	}
	if !p.OutOfHours.Empty() {
		e.say("%s", words.T("At night: %s", contact(p.OutOfHours)))
	}
	for _, g := range p.Goals {
		e.say("%s", words.T("Goal: %s, by %s", g.Words, view.DateWords(g.By)))
	}
	for _, x := range p.Sent {
		e.say("%s", words.T("Handed over: %[1]s, %[2]s, %[3]s", words.Of(x.Kind), x.At.Format("2006-01-02 15:04"), x.Examiner))
	}
	for _, w := range gaps(r) {
		e.say("%s", w)
	}
	if n := len(r.Conflicts); n > 0 {
		e.say("%s", words.N(n, "%d field has several values that nobody has chosen between", "%d fields have several values that nobody has chosen between", n))
	}
	w := tabwriter.NewWriter(e.out, 0, 4, 2, ' ', 0)
	fmt.Fprintln(w, strings.Join([]string{words.T("Visit"), words.T("Examiner"), words.T("Limbs"), words.T("Tested"), words.T("Abnormal"), words.T("State"), words.T("Id")}, "\t"))
	for _, v := range r.Visits {
		l := visitLineOf(v)
		state := words.T("open")
		if l.Closed {
			state = words.T("closed")
		}
		var motor [4]int8
		for i, site := range exam.Limbs() {
			motor[i] = -1
			if g, ok := v.Grade(exam.VoluntaryMotor, site); ok {
				motor[i] = g
			}
		}
		fmt.Fprintf(w, "%s\t%s\t%s\t%d\t%d\t%s\t%s\n", shortDay(v.Examined), v.Examiner, limbWords(motor), l.Tested, l.Abnormal, state, v.ID)
	}
	return w.Flush()
}

// some is the slice, never null in JSON.
func some[T any](s []T) []T {
	if s == nil {
		return []T{}
	}
	return s
}

func contact(c exam.Contact) string {
	parts := []string{}
	for _, p := range []string{c.Name, c.Phone, c.Email} {
		if p != "" {
			parts = append(parts, p)
		}
	}
	return strings.Join(parts, ", ")
}

// patientJoinCmd says that two records are one animal.
type patientJoinCmd struct {
	A        string `arg:"" help:"One patient."`
	B        string `arg:"" help:"The other."`
	Examiner string `help:"Who makes the change."`
}

func (c *patientJoinCmd) Run(e *env) error {
	return e.edge(c.A, c.B, c.Examiner, func(a, b storage.Record) ([]storage.Edit, error) {
		if a.Patient.ID == b.Patient.ID {
			return nil, fmt.Errorf("%s", words.T("the two are one animal already"))
		}
		if a.Patient.Species != b.Patient.Species {
			return nil, fmt.Errorf("%s", words.T("a %s and a %s are not one animal", view.SpeciesName(a.Patient.Species), view.SpeciesName(b.Patient.Species)))
		}
		return storage.JoinEdit(a.Patient.ID, b.Patient.ID), nil
	})
}

// patientPartCmd takes a joining back.
type patientPartCmd struct {
	A        string `arg:"" help:"One patient's own id."`
	B        string `arg:"" help:"The other's own id."`
	Examiner string `help:"Who makes the change."`
}

func (c *patientPartCmd) Run(e *env) error {
	return e.change(func(s *storage.Store) error {
		a, err := exam.ParseID(strings.ToLower(c.A))
		if err != nil {
			return err
		}
		b, err := exam.ParseID(strings.ToLower(c.B))
		if err != nil {
			return err
		}
		r, err := s.Patient(a)
		if err != nil {
			return err
		}
		if !slices.Contains(r.Joined, a) || !slices.Contains(r.Joined, b) || a == b {
			return fmt.Errorf("%s", words.T("the two are not joined"))
		}
		who, err := e.examiner(s, c.Examiner)
		if err != nil {
			return err
		}
		if _, err := s.Apply(e.ctx, who, storage.PartEdit(a, b)...); err != nil {
			return err
		}
		e.say("%s", words.T("Parted."))
		return nil
	})
}

func (e *env) edge(a, b, who string, edits func(a, b storage.Record) ([]storage.Edit, error)) error {
	return e.change(func(s *storage.Store) error {
		x, err := e.patient(s, a)
		if err != nil {
			return err
		}
		y, err := e.patient(s, b)
		if err != nil {
			return err
		}
		list, err := edits(x, y)
		if err != nil {
			return err
		}
		name, err := e.examiner(s, who)
		if err != nil {
			return err
		}
		if _, err := s.Apply(e.ctx, name, list...); err != nil {
			return err
		}
		id := x.Patient.ID
		if slices.Compare(y.Patient.ID[:], id[:]) < 0 {
			id = y.Patient.ID
		}
		e.say("%s", words.T("Joined; shown under %s.", id))
		return nil
	})
}
