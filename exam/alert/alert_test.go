package alert

import (
	"fmt"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/exam"
)

const (
	pl, pr = exam.PelvicLeft, exam.PelvicRight
	tl, tr = exam.ThoracicLeft, exam.ThoracicRight
	le, ri = exam.Left, exam.Right
)

var day0 = time.Date(2026, 3, 2, 10, 0, 0, 0, time.UTC)

func f(i exam.Item, grade int8, sites ...exam.Site) (out []exam.Finding) {
	if len(sites) == 0 {
		sites = i.Info().Sites
	}
	for _, s := range sites {
		out = append(out, exam.Finding{Item: i, Site: s, Result: exam.Graded(grade)})
	}
	return out
}

func trunci(level string, sites ...exam.Site) (out []exam.Finding) {
	v, err := exam.ParseVertebra(level, exam.Dog)
	if err != nil {
		panic(err)
	}
	for _, s := range sites {
		out = append(out, exam.Finding{Item: exam.CutaneousTrunci, Site: s, Result: exam.Graded(1), Level: v})
	}
	return out
}

// on makes a visit so many days after day0.
func on(days float64, parts ...any) exam.Visit {
	v := exam.Visit{ID: exam.ID{byte(days + 1), 7}, Examined: day0.Add(time.Duration(days * 24 * float64(time.Hour))), Examiner: "R. Okafor"}
	for _, p := range parts {
		switch p := p.(type) {
		case []exam.Finding:
			v.Findings = append(v.Findings, p...)
		case exam.Measured:
			v.Measures = append(v.Measures, p)
		case exam.Treatment:
			v.Treatments = append(v.Treatments, p)
		}
	}
	return v
}

func measured(m exam.Measure, value float64) exam.Measured {
	return exam.Measured{Measure: m, Value: value}
}

func dog(problems ...exam.Problem) exam.Patient {
	return exam.Patient{Species: exam.Dog, Name: "Juno", Problems: problems}
}

func flagged(p exam.Patient, rule string, visits ...exam.Visit) (Flag, bool) {
	for _, x := range Scan(p, visits, visits[len(visits)-1].Examined) {
		if x.Rule == rule && !x.CannotRuleOut && x.Visit == visits[len(visits)-1].ID {
			return x, true
		}
	}
	return Flag{}, false
}

var (
	disc  = exam.Problem{Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-02-27", Surgery: "2026-02-28"}
	later = exam.Problem{Diagnosis: "disc extrusion", Level: "T12-T13", Onset: "2026-01-05"}
	neck  = exam.Problem{Diagnosis: "disc extrusion", Level: "C4-C5", Onset: "2026-02-20", Surgery: "2026-03-01"}
)

// One series that must fire and one near miss that must not, for each flag of the published list.
func TestEachFlagFiresAndNearlyFires(t *testing.T) {
	plegia := f(exam.VoluntaryMotor, 0, pl, pr)
	for _, tt := range []struct {
		rule    string
		name    string
		p       exam.Patient
		visits  []exam.Visit
		urgency Urgency
		near    []exam.Visit
		nearP   *exam.Patient
	}{
		{"deep-pain-lost", "felt, then lost", dog(), []exam.Visit{on(0, f(exam.DeepPain, 2, pl)), on(7, f(exam.DeepPain, 0, pl))}, Now,
			[]exam.Visit{on(0, f(exam.DeepPain, 2, pl)), on(7, f(exam.DeepPain, 1, pl))}, nil},
		{"deep-pain-lost", "implied, then lost", dog(), []exam.Visit{on(0, f(exam.SuperficialPain, 1, pl)), on(7, f(exam.DeepPain, 0, pl))}, Now,
			[]exam.Visit{on(0, f(exam.SuperficialPain, 1, pl)), on(7, f(exam.DeepPain, 0, pl), f(exam.SuperficialPain, 1, pl))}, nil},
		{"deep-pain-lost", "unknown before", dog(), []exam.Visit{on(0, plegia), on(7, f(exam.DeepPain, 0, exam.TailBase))}, Now,
			[]exam.Visit{on(0, f(exam.DeepPain, 0, pl)), on(7, f(exam.DeepPain, 0, pl))}, nil},
		{"deep-pain-lost", "first exam", dog(), []exam.Visit{on(0, f(exam.DeepPain, 0, pl))}, Now, []exam.Visit{on(0, f(exam.DeepPain, 1, pl))}, nil},
		{"deep-pain-lost", "one digit answers", dog(), []exam.Visit{on(0, f(exam.DeepPain, 1, pl)), on(1, f(exam.DeepPain, 0, pl))}, Now,
			[]exam.Visit{on(0, f(exam.DeepPain, 1, pl)), on(1, []exam.Finding{{Item: exam.DeepPain, Site: pl, Digit: exam.Medial, Result: exam.Graded(0)}, {Item: exam.DeepPain, Site: pl, Digit: exam.Lateral, Result: exam.Graded(1)}})}, nil},

		{"trunci-rises", "two vertebrae", dog(), []exam.Visit{on(0, plegia, trunci("L1", le)), on(1, plegia, trunci("T12", le))}, Now,
			[]exam.Visit{on(0, plegia, trunci("L1", le)), on(1, plegia, trunci("T13", le))}, nil},
		{"trunci-rises", "one vertebra, reflexes fell too", dog(), []exam.Visit{on(0, plegia, trunci("L1", le), f(exam.Patellar, 2)), on(1, plegia, trunci("T13", le), f(exam.Patellar, 0))}, Now,
			[]exam.Visit{on(0, plegia, trunci("L1", le), f(exam.Patellar, 2)), on(1, plegia, trunci("L2", le), f(exam.Patellar, 0))}, nil},
		{"trunci-rises", "from the normal border", dog(), []exam.Visit{on(0, plegia, f(exam.CutaneousTrunci, 2)), on(1, plegia, trunci("T12", le))}, Now,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 3), trunci("L1", le)), on(1, f(exam.VoluntaryMotor, 3), trunci("T11", le))}, nil},
		{"trunci-rises", "absent throughout", dog(), []exam.Visit{on(0, plegia, trunci("T13", ri)), on(1, plegia, f(exam.CutaneousTrunci, 0, ri))}, Now,
			[]exam.Visit{on(0, plegia, trunci("T13", ri)), on(1, plegia, f(exam.CutaneousTrunci, 1, ri))}, nil},
		{"trunci-rises", "not in cats", dog(), []exam.Visit{on(0, plegia, trunci("L1", le)), on(1, plegia, trunci("T11", le))}, Now,
			[]exam.Visit{on(0, plegia, trunci("L1", le)), on(1, plegia, trunci("T11", le))}, &exam.Patient{Species: exam.Cat}},

		{"reflexes-lost", "patellar gone", dog(), []exam.Visit{on(0, plegia, f(exam.Patellar, 2)), on(1, plegia, f(exam.Patellar, 0))}, Now,
			[]exam.Visit{on(0, plegia, f(exam.Patellar, 4)), on(1, plegia, f(exam.Patellar, 2))}, nil},
		{"reflexes-lost", "anal tone reduced", dog(), []exam.Visit{on(0, plegia, f(exam.AnalTone, 2)), on(1, plegia, f(exam.AnalTone, 1))}, Now,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 2), f(exam.AnalTone, 2)), on(1, f(exam.VoluntaryMotor, 2), f(exam.AnalTone, 1))}, nil},
		{"reflexes-lost", "still absent is not new", dog(), []exam.Visit{on(0, plegia, f(exam.Tone, 3, pl)), on(1, plegia, f(exam.Tone, 1, pl))}, Now,
			[]exam.Visit{on(0, plegia, f(exam.Tone, 0, pl)), on(1, plegia, f(exam.Tone, 0, pl))}, nil},

		{"ascending", "thoracic limb newly weak", dog(disc), []exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl, tr)), on(1, f(exam.VoluntaryMotor, 3, tl))}, Now,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl, tr)), on(1, f(exam.VoluntaryMotor, 3, pl))}, nil},
		{"ascending", "new Horner", dog(disc), []exam.Visit{on(0, f(exam.Horner, 0)), on(1, f(exam.Horner, 1, le))}, Now,
			[]exam.Visit{on(0, f(exam.Horner, 1)), on(1, f(exam.Horner, 1, le))}, nil},
		{"ascending", "a neck case is another matter", dog(disc), []exam.Visit{on(0, f(exam.PawPlacement, 2, tl)), on(1, f(exam.PawPlacement, 1, tl))}, Now,
			[]exam.Visit{on(0, f(exam.PawPlacement, 2, tl)), on(1, f(exam.PawPlacement, 1, tl))}, &exam.Patient{Species: exam.Dog, Problems: []exam.Problem{{Diagnosis: "disc", Level: "C4-C5"}}}},

		{"breathing", "shallow in tetraparesis", dog(), []exam.Visit{on(0, f(exam.VoluntaryMotor, 2), f(exam.Breathing, 2)), on(1, f(exam.VoluntaryMotor, 2), f(exam.Breathing, 1))}, Now,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4), f(exam.Breathing, 2)), on(1, f(exam.VoluntaryMotor, 4), f(exam.Breathing, 1))}, nil},
		{"breathing", "laboured in anybody", dog(), []exam.Visit{on(0, f(exam.Breathing, 2)), on(1, f(exam.Breathing, 0))}, Now,
			[]exam.Visit{on(0, f(exam.Gums, 2)), on(1, f(exam.Gums, 1))}, nil},
		{"breathing", "weak bark", dog(neck), []exam.Visit{on(0, f(exam.Voice, 2)), on(1, f(exam.Voice, 1))}, Now,
			[]exam.Visit{on(0, f(exam.Voice, 1)), on(1, f(exam.Voice, 1))}, nil},
		{"breathing", "blue gums", dog(), []exam.Visit{on(0, f(exam.Gums, 0))}, Now, []exam.Visit{on(0, f(exam.Gums, 1))}, nil},

		{"drop", "stops walking in the first two weeks", dog(disc), []exam.Visit{on(0, f(exam.Ambulation, 2)), on(5, f(exam.Ambulation, 1))}, Now,
			[]exam.Visit{on(0, f(exam.Ambulation, 1)), on(5, f(exam.Ambulation, 2))}, nil},
		{"drop", "later, and whatever the gap", dog(later), []exam.Visit{on(0, f(exam.Ambulation, 2)), on(90, f(exam.Ambulation, 1))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4, pl)), on(90, f(exam.VoluntaryMotor, 3, pl))}, nil},
		{"drop", "two grades in one limb", dog(later), []exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl)), on(7, f(exam.VoluntaryMotor, 2, tl))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl)), on(7, f(exam.VoluntaryMotor, 3, tl))}, nil},
		{"drop", "a Frankel class", dog(later), []exam.Visit{on(0, plegia, f(exam.SuperficialPain, 1, pl)), on(7, plegia, f(exam.SuperficialPain, 0, pl, pr, exam.TailBase), f(exam.DeepPain, 1, pl))}, Today,
			[]exam.Visit{on(0, plegia), on(7, plegia, f(exam.SuperficialPain, 0, pl, pr, exam.TailBase), f(exam.DeepPain, 1, pl))}, nil},
		{"drop", "becomes plegic", dog(later), []exam.Visit{on(0, f(exam.VoluntaryMotor, 1, pl)), on(7, f(exam.VoluntaryMotor, 0, pl))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 2, pl)), on(7, f(exam.VoluntaryMotor, 1, pl))}, nil},

		{"spinal-pain", "severe", dog(), []exam.Visit{on(0, f(exam.SpinalPain, 3, exam.Lumbar))}, Today, []exam.Visit{on(0, f(exam.SpinalPain, 2, exam.Lumbar))}, nil},
		{"spinal-pain", "up two grades", dog(), []exam.Visit{on(0, f(exam.SpinalPain, 0, exam.Lumbar)), on(7, f(exam.SpinalPain, 2, exam.Lumbar))}, Today,
			[]exam.Visit{on(0, f(exam.SpinalPain, 1, exam.Lumbar)), on(7, f(exam.SpinalPain, 2, exam.Lumbar))}, nil},
		{"spinal-pain", "new neck pain", dog(), []exam.Visit{on(0, f(exam.SpinalPain, 0, exam.Cervical)), on(7, f(exam.SpinalPain, 1, exam.Cervical))}, Today,
			[]exam.Visit{on(0, f(exam.SpinalPain, 1, exam.Cervical)), on(7, f(exam.SpinalPain, 1, exam.Cervical))}, nil},

		{"relapse", "better, then worse", dog(), []exam.Visit{on(0, f(exam.VoluntaryMotor, 2, pl, pr)), on(7, f(exam.VoluntaryMotor, 3, pl, pr)), on(14, f(exam.VoluntaryMotor, 2, pl, pr))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 2, pl, pr)), on(7, f(exam.VoluntaryMotor, 3, pl, pr)), on(14, f(exam.VoluntaryMotor, 2, pl), f(exam.VoluntaryMotor, 3, pr))}, nil},
		{"relapse", "worse without a gain is no relapse", dog(), []exam.Visit{on(0, f(exam.PawPlacement, 0)), on(7, f(exam.PawPlacement, 1)), on(14, f(exam.PawPlacement, 1)), on(21, f(exam.PawPlacement, 0))}, Today,
			[]exam.Visit{on(0, f(exam.PawPlacement, 2)), on(7, f(exam.PawPlacement, 1)), on(14, f(exam.PawPlacement, 0))}, nil},

		{"relapse", "a slow slide", dog(), []exam.Visit{on(0, f(exam.VoluntaryMotor, 2, pl, pr)), on(7, f(exam.VoluntaryMotor, 4, pl, pr)), on(14, f(exam.VoluntaryMotor, 4, pl), f(exam.VoluntaryMotor, 3, pr)), on(21, f(exam.VoluntaryMotor, 3, pl, pr))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 1, pl, pr)), on(7, f(exam.VoluntaryMotor, 4, pl, pr)), on(14, f(exam.VoluntaryMotor, 2, pl, pr)), on(21, f(exam.VoluntaryMotor, 3, pl, pr))}, nil},

		{"urine-held", "voiding falls", dog(), []exam.Visit{on(0, f(exam.VoluntaryUrination, 2)), on(1, f(exam.VoluntaryUrination, 1))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryUrination, 0)), on(1, f(exam.VoluntaryUrination, 0))}, nil},
		{"urine-held", "large and hard", dog(), []exam.Visit{on(0, f(exam.BladderFill, 1), f(exam.BladderOutflow, 1))}, Today,
			[]exam.Visit{on(0, f(exam.BladderFill, 1), f(exam.BladderOutflow, 2))}, nil},
		{"urine-held", "no urine for 12 h", dog(), []exam.Visit{on(0, measured(exam.HoursSinceUrination, 12))}, Today,
			[]exam.Visit{on(0, measured(exam.HoursSinceUrination, 11.9))}, nil},
		{"urine-held", "tense and painful", dog(), []exam.Visit{on(0, f(exam.BladderFill, 0), measured(exam.PainAtRest, 6))}, Now,
			[]exam.Visit{on(0, f(exam.BladderFill, 2), measured(exam.PainAtRest, 6))}, nil},

		{"incontinence", "stools", dog(), []exam.Visit{on(0, f(exam.FaecalContinence, 2)), on(1, f(exam.FaecalContinence, 1))}, Today,
			[]exam.Visit{on(0, f(exam.FaecalContinence, 1)), on(1, f(exam.FaecalContinence, 1))}, nil},
		{"incontinence", "new leaking", dog(), []exam.Visit{on(0, f(exam.UrineLeak, 0)), on(1, f(exam.UrineLeak, 1))}, Today,
			[]exam.Visit{on(0, f(exam.UrineLeak, 2)), on(1, f(exam.UrineLeak, 1))}, nil},
		{"incontinence", "outflow", dog(), []exam.Visit{on(0, f(exam.BladderOutflow, 3)), on(1, f(exam.BladderOutflow, 0))}, Today,
			[]exam.Visit{on(0, f(exam.BladderOutflow, 3)), on(1, f(exam.BladderOutflow, 2))}, nil},

		{"urine-infected", "cloudy", dog(), []exam.Visit{on(0, f(exam.UrineLook, 1))}, Soon, []exam.Visit{on(0, f(exam.UrineLook, 2))}, nil},
		{"urine-infected", "bloody with fever", dog(), []exam.Visit{on(0, f(exam.UrineLook, 0), measured(exam.Temperature, 39.6))}, Today, []exam.Visit{on(0, measured(exam.Temperature, 39.6))}, nil},

		{"fever", "39.5", dog(), []exam.Visit{on(0, measured(exam.Temperature, 39.5))}, Today, []exam.Visit{on(0, measured(exam.Temperature, 39.4))}, nil},
		{"fever", "does not eat", dog(), []exam.Visit{on(0, f(exam.Appetite, 0))}, Today, []exam.Visit{on(0, f(exam.Appetite, 1))}, nil},

		{"aspiration", "coughs", dog(), []exam.Visit{on(0, f(exam.Cough, 1))}, Today, []exam.Visit{on(0, f(exam.Cough, 0))}, nil},
		{"aspiration", "gag reduced, with effort", dog(), []exam.Visit{on(0, f(exam.Gag, 1), f(exam.Breathing, 0))}, Now, []exam.Visit{on(0, f(exam.Gag, 2))}, nil},

		{"skin", "open sore", dog(), []exam.Visit{on(0, f(exam.Skin, 0, pl))}, Today, []exam.Visit{on(0, f(exam.Skin, 2, pl))}, nil},
		{"skin", "redness", dog(), []exam.Visit{on(0, f(exam.Skin, 1, exam.Perineum))}, Soon, []exam.Visit{on(0, f(exam.Skin, 2, exam.Perineum))}, nil},
		{"wound", "swollen", dog(), []exam.Visit{on(0, f(exam.Wound, 1))}, Today, []exam.Visit{on(0, f(exam.Wound, 3))}, nil},

		{"brain", "duller", dog(), []exam.Visit{on(0, f(exam.Mentation, 3)), on(1, f(exam.Mentation, 2))}, Now, []exam.Visit{on(0, f(exam.Mentation, 2)), on(1, f(exam.Mentation, 2))}, nil},
		{"brain", "new circling", dog(), []exam.Visit{on(0, f(exam.Mentation, 3)), on(1, f(exam.Circling, 1, le))}, Now, []exam.Visit{on(0, f(exam.Circling, 1, le)), on(1, f(exam.Circling, 1, le))}, nil},
		{"brain", "new head tilt", dog(), []exam.Visit{on(0, f(exam.HeadTilt, 0)), on(1, f(exam.HeadTilt, 1, le))}, Now, []exam.Visit{on(0, f(exam.HeadTilt, 1, le))}, nil},
		{"brain", "resting nystagmus", dog(), []exam.Visit{on(0, f(exam.Nystagmus, 0)), on(1, f(exam.Nystagmus, 2))}, Now, []exam.Visit{on(0, f(exam.Nystagmus, 0)), on(1, f(exam.Nystagmus, 1))}, nil},
		{"brain", "seizure", dog(), []exam.Visit{on(0, f(exam.SeizureSinceLast, 1))}, Now, []exam.Visit{on(0, f(exam.SeizureSinceLast, 0))}, nil},
		{"brain", "coma scale", dog(), []exam.Visit{on(0, measured(exam.ScaleMGCS, 18)), on(1, measured(exam.ScaleMGCS, 17))}, Now, []exam.Visit{on(0, measured(exam.ScaleMGCS, 17)), on(1, measured(exam.ScaleMGCS, 18))}, nil},

		{"self-trauma", "chews", dog(), []exam.Visit{on(0, f(exam.SelfTrauma, 1))}, Today, []exam.Visit{on(0, f(exam.SelfTrauma, 0))}, nil},
		{"no-pulse", "no pulse", dog(), []exam.Visit{on(0, f(exam.FemoralPulse, 0, le))}, Now, []exam.Visit{on(0, f(exam.FemoralPulse, 1, le))}, nil},
		{"no-pulse", "cold and painful", dog(), []exam.Visit{on(0, f(exam.PawWarmth, 0, pl), f(exam.LimbPain, 2, pl))}, Now, []exam.Visit{on(0, f(exam.PawWarmth, 1, pl), f(exam.LimbPain, 2, pl))}, nil},
		{"no-pulse", "cold with pale gums", dog(), []exam.Visit{on(0, f(exam.PawWarmth, 0, pl), f(exam.Gums, 1))}, Now, []exam.Visit{on(0, f(exam.PawWarmth, 0, tl), f(exam.Gums, 1))}, nil},

		{"not-as-expected", "infarct worsens", dog(exam.Problem{Diagnosis: "FCEM", Onset: "2026-03-01"}), []exam.Visit{on(0, f(exam.VoluntaryMotor, 3, pl)), on(7, f(exam.VoluntaryMotor, 2, pl))}, Today,
			[]exam.Visit{on(-0.5, f(exam.VoluntaryMotor, 3, pl)), on(0, f(exam.VoluntaryMotor, 2, pl))}, nil},
		{"not-as-expected", "painful degenerative myelopathy", dog(exam.Problem{Diagnosis: "Degenerative myelopathy"}), []exam.Visit{on(0, f(exam.Ambulation, 2)), on(7, f(exam.SpinalPain, 1, exam.Lumbar))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 3, pl)), on(7, f(exam.VoluntaryMotor, 2, pl))}, nil},
		{"not-as-expected", "stepwise degenerative myelopathy", dog(exam.Problem{Diagnosis: "Degenerative myelopathy"}), []exam.Visit{on(0, f(exam.VoluntaryMotor, 4, pl)), on(7, f(exam.VoluntaryMotor, 2, pl))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4, pl)), on(60, f(exam.VoluntaryMotor, 2, pl))}, nil},
		{"not-as-expected", "plexus injury, new limb", dog(exam.Problem{Diagnosis: "brachial plexus injury", Side: "left"}), []exam.Visit{on(0, f(exam.VoluntaryMotor, 0, tl), f(exam.VoluntaryMotor, 4, pl)), on(7, f(exam.VoluntaryMotor, 3, pl))}, Today,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 1, tl), f(exam.VoluntaryMotor, 4, pl)), on(7, f(exam.VoluntaryMotor, 0, tl))}, nil},

		{"no-return", "two weeks on", dog(exam.Problem{Diagnosis: "disc", Onset: "2026-03-01"}), []exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(14, f(exam.DeepPain, 0, pl, pr))}, Soon,
			[]exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(7, f(exam.DeepPain, 0, pl, pr))}, nil},
		{"no-return", "felt in between", dog(exam.Problem{Diagnosis: "disc", Onset: "2026-03-01"}), []exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(20, f(exam.DeepPain, 0, pl, pr))}, Soon,
			[]exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(7, f(exam.DeepPain, 1, pl)), on(14, f(exam.DeepPain, 0, pl, pr))}, nil},
		{"no-return", "the tail feels", dog(exam.Problem{Diagnosis: "disc", Onset: "2026-03-01"}), []exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(20, f(exam.DeepPain, 0, pl, pr))}, Soon,
			[]exam.Visit{on(0, f(exam.DeepPain, 0, pl, pr)), on(20, f(exam.DeepPain, 0, pl, pr), f(exam.DeepPain, 1, exam.TailBase))}, nil},

		{"after-neck", "after surgery", dog(neck), []exam.Visit{on(0, f(exam.PawPlacement, 2, tl)), on(2, f(exam.PawPlacement, 1, tl))}, Now,
			[]exam.Visit{on(0, f(exam.PawPlacement, 2, pl)), on(2, f(exam.PawPlacement, 1, pl))}, nil},
		{"after-neck", "after manipulation", dog(), []exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl), exam.Treatment{Kind: "joint-mobilisation", Site: "cervical"}), on(7, f(exam.VoluntaryMotor, 3, tl))}, Now,
			[]exam.Visit{on(0, f(exam.VoluntaryMotor, 4, tl), exam.Treatment{Kind: "massage", Site: "lumbar"}), on(7, f(exam.VoluntaryMotor, 3, tl))}, nil},

		{"overflow", "large and leaking", dog(), []exam.Visit{on(0, f(exam.BladderFill, 1), f(exam.UrineLeak, 2))}, Today, []exam.Visit{on(0, f(exam.BladderFill, 2), f(exam.UrineLeak, 2))}, nil},
		{"overflow", "tense and dripping", dog(), []exam.Visit{on(0, f(exam.BladderFill, 0), f(exam.BladderOutflow, 0))}, Today, []exam.Visit{on(0, f(exam.BladderFill, 0), f(exam.BladderOutflow, 1))}, nil},
	} {
		t.Run(tt.rule+": "+tt.name, func(t *testing.T) {
			flag, ok := flagged(tt.p, tt.rule, tt.visits...)
			require.True(t, ok, "must fire")
			require.Equal(t, tt.urgency, flag.Urgency, flag.Seen)
			require.NotEmpty(t, flag.Seen)
			require.NotEmpty(t, flag.Why)
			require.NotEmpty(t, flag.Do)
			require.NotEmpty(t, flag.Source)
			require.Equal(t, "R. Okafor", flag.ToExaminer)
			require.Contains(t, flag.Words(), flag.Seen)
			require.NotContains(t, flag.Words(), "!")
			last := tt.visits[len(tt.visits)-1]
			require.Equal(t, last.ID, flag.Visit)
			require.True(t, flag.Open())
			if !flag.From.IsZero() {
				require.True(t, flag.From.Before(flag.To))
				require.NotEmpty(t, flag.FromExaminer)
			}
			nearP := tt.p
			if tt.nearP != nil {
				nearP = *tt.nearP
			}
			near, ok := flagged(nearP, tt.rule, tt.near...)
			require.False(t, ok, "near miss fired: %s", near.Seen)
		})
	}
}

func TestNumbersAreThePublishedOnes(t *testing.T) {
	seen := map[int]bool{}
	keys := map[string]bool{}
	for _, r := range Rules() {
		require.False(t, seen[r.Number] || keys[r.Key])
		seen[r.Number], keys[r.Key] = true, true
		require.NotEmpty(t, r.Name)
	}
	for n := 1; n <= 22; n++ {
		require.True(t, seen[n], "flag %d has no rule", n)
	}
	require.Len(t, seen, 22)
}

// Every flag with the items and measures that can raise it, as a list kept in testdata, and each item
// proved: for it there is a series in which it alone decides whether the flag is raised.
func TestEveryItemOfARuleCanRaiseIt(t *testing.T) {
	var list strings.Builder
	for _, r := range Rules() {
		fmt.Fprintf(&list, "%d %s:", r.Number, r.Key)
		for _, i := range r.Items {
			list.WriteString(" " + i.String())
		}
		for _, m := range r.Measure {
			list.WriteString(" " + m.String())
		}
		list.WriteString("\n")
	}
	want, err := os.ReadFile("testdata/flags.txt")
	require.NoError(t, err)
	require.Equal(t, string(want), list.String())

	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 2))
	for _, r := range Rules() {
		for _, i := range r.Items {
			require.True(t, decides(rnd, r, i, exam.NoMeasure), "%s: %s decided nothing in many tries", r.Key, i)
		}
		for _, m := range r.Measure {
			require.True(t, decides(rnd, r, exam.NoItem, m), "%s: %s decided nothing in many tries", r.Key, m)
		}
	}
}

// decides draws random series of three visits and asks whether taking the item (or the measure) out of the last
// one takes the flag away.
func decides(rnd *rand.Rand, r Rule, item exam.Item, measure exam.Measure) bool {
	problems := []exam.Problem{disc, later, neck, {Diagnosis: "FCEM", Onset: "2026-02-20"}, {Diagnosis: "degenerative myelopathy"}, {Diagnosis: "plexus injury"}, {Diagnosis: "disc", Onset: "2026-02-01"}}
	for range 20000 {
		p := dog(problems[rnd.IntN(len(problems))])
		var vs []exam.Visit
		gap := 1 + 9*rnd.IntN(2)
		for k := range 3 {
			v := on(float64(gap * k))
			items := slices.Clone(r.Items)
			if !slices.Contains(items, exam.VoluntaryMotor) {
				items = append(items, exam.VoluntaryMotor)
			}
			still := k > 0 && rnd.IntN(2) == 0 // only the item in question moves
			one := rnd.IntN(2) == 0            // all sites alike
			if still {
				v.Findings = slices.DeleteFunc(slices.Clone(vs[k-1].Findings), func(x exam.Finding) bool { return x.Item == item })
				items = []exam.Item{item}
			}
			for _, i := range items {
				if i == exam.NoItem {
					continue
				}
				same := i.Info().First + int8(rnd.IntN(int(i.Last()-i.Info().First)+1))
				if rnd.IntN(4) == 0 && i != item {
					continue
				}
				for _, s := range i.Info().Sites {
					grade := i.Info().First + int8(rnd.IntN(int(i.Last()-i.Info().First)+1))
					if rnd.IntN(2) == 0 && i.Info().Normal >= 0 {
						grade = i.Info().Normal
					}
					if one {
						grade = same
					}
					x := exam.Finding{Item: i, Site: s, Result: exam.Graded(grade)}
					if i == exam.CutaneousTrunci && grade == 1 {
						x.Level = exam.NewVertebra(exam.RegionT, 9+rnd.IntN(5))
					}
					if i == exam.VoluntaryMotor && !still && rnd.IntN(2) == 0 {
						x.Result = exam.Graded(0)
					}
					v.Findings = append(v.Findings, x)
				}
			}
			for _, m := range r.Measure {
				in := m.Info()
				v.Measures = append(v.Measures, measured(m, in.Min+float64(rnd.IntN(int(in.Max-in.Min)+1))))
			}
			vs = append(vs, v)
		}
		if _, ok := flagged(p, r.Key, vs...); !ok {
			continue
		}
		without := slices.Clone(vs)
		last := &without[2]
		last.Findings = slices.DeleteFunc(slices.Clone(last.Findings), func(x exam.Finding) bool { return x.Item == item })
		last.Measures = slices.DeleteFunc(slices.Clone(last.Measures), func(x exam.Measured) bool { return x.Measure == measure })
		full, _ := flagged(p, r.Key, vs...)
		if less, ok := flagged(p, r.Key, without...); !ok || less.Urgency < full.Urgency {
			return true
		}
	}
	return false
}

// What was abnormal and is untested today reads «cannot rule out».
func TestCannotRuleOut(t *testing.T) {
	find := func(rule string, p exam.Patient, vs ...exam.Visit) (Flag, bool) {
		for _, x := range Scan(p, vs, vs[len(vs)-1].Examined) {
			if x.Rule == rule && x.CannotRuleOut {
				return x, true
			}
		}
		return Flag{}, false
	}
	x, ok := find("wound", dog(), on(0, f(exam.Wound, 1)), on(7, f(exam.Mentation, 3)))
	require.True(t, ok)
	require.Contains(t, x.Words(), "Cannot rule out")
	require.Contains(t, x.Seen, "not tested today")
	require.Equal(t, Soon, x.Urgency)
	_, ok = find("wound", dog(), on(0, f(exam.Wound, 1)), on(7, f(exam.Wound, 2)))
	require.False(t, ok)
	_, ok = find("wound", dog(), on(0, f(exam.Wound, 2)), on(7, f(exam.Mentation, 3)))
	require.False(t, ok)
	_, ok = find("wound", dog(), on(0, f(exam.Wound, 1)), on(3, f(exam.Mentation, 3)), on(7, f(exam.Mentation, 3)))
	require.True(t, ok, "two visits without a look do not make it sound")

	_, ok = find("deep-pain-lost", dog(), on(0, f(exam.DeepPain, 0, pl)), on(7, f(exam.VoluntaryMotor, 0, pl)))
	require.True(t, ok)
	_, ok = find("deep-pain-lost", dog(), on(0, f(exam.DeepPain, 0, pl)), on(7, f(exam.VoluntaryMotor, 2, pl)))
	require.False(t, ok, "the limb moves on purpose")
	_, ok = find("deep-pain-lost", dog(), on(0, f(exam.DeepPain, 0, pl)), on(7, f(exam.SuperficialPain, 2, pl)))
	require.False(t, ok, "implied")
	_, ok = find("trunci-rises", dog(), on(0, f(exam.VoluntaryMotor, 0, pl), trunci("T13", le)), on(7, f(exam.Mentation, 3)))
	require.True(t, ok)
	_, ok = find("trunci-rises", dog(), on(0, f(exam.VoluntaryMotor, 0, pl), trunci("L5", le)), on(7, f(exam.Mentation, 3)))
	require.False(t, ok, "a border at L5 is normal")
	_, ok = find("reflexes-lost", dog(), on(0, f(exam.VoluntaryMotor, 0, pl), f(exam.Patellar, 1, pl)), on(7, f(exam.Mentation, 3)))
	require.True(t, ok)
	_, ok = find("reflexes-lost", dog(), on(0, f(exam.VoluntaryMotor, 0, pl), f(exam.Patellar, 3, pl)), on(7, f(exam.Mentation, 3)))
	require.False(t, ok, "a brisk reflex was not lost")
	// a reason for not testing does not rule out either
	v := on(7)
	v.Findings = []exam.Finding{{Item: exam.Wound, Site: exam.Midline, Result: exam.Untested(exam.Temperament)}}
	_, ok = find("wound", dog(), on(0, f(exam.Wound, 1)), v)
	require.True(t, ok)
}

func TestAnswers(t *testing.T) {
	a, b := on(0, f(exam.DeepPain, 2, pl)), on(7, f(exam.DeepPain, 0, pl), f(exam.UrineLook, 1))
	flags := Scan(dog(), []exam.Visit{b, a}, b.Examined)
	require.Equal(t, "deep-pain-lost", flags[0].Rule, "most urgent first")
	worst, open := Worst(flags)
	require.True(t, open)
	require.Equal(t, Now, worst)
	may, why := MayClose(flags, b.ID)
	require.False(t, may, "a visit with an unanswered now flag cannot be closed")
	require.Len(t, why, 1)

	b.Answers = []exam.Acknowledgement{{Rule: "deep-pain-lost", Told: "Dr Lindqvist", Examiner: "R. Okafor", At: b.Examined}}
	flags = Scan(dog(), []exam.Visit{a, b}, b.Examined)
	may, _ = MayClose(flags, b.ID)
	require.True(t, may)
	i := slices.IndexFunc(flags, func(x Flag) bool { return x.Rule == "deep-pain-lost" })
	require.GreaterOrEqual(t, i, 0, "an answered flag is kept")
	require.Equal(t, "Dr Lindqvist", flags[i].Answered.Told)
	require.Equal(t, "urine-infected", flags[0].Rule, "open flags first")
	worst, _ = Worst(flags)
	require.Equal(t, Soon, worst)
	_, open = Worst(nil)
	require.False(t, open)
}

// An unanswered flag of an earlier, unfinished visit stays for two weeks; a closed one has been answered.
func TestOpenFlagsOfEarlierVisits(t *testing.T) {
	a, b, c := on(0, f(exam.Wound, 2)), on(7, f(exam.Wound, 0)), on(10, f(exam.Wound, 2))
	has := func(vs []exam.Visit, now time.Time) bool {
		return slices.ContainsFunc(Scan(dog(), vs, now), func(x Flag) bool { return x.Rule == "wound" && x.Visit == b.ID })
	}
	require.True(t, has([]exam.Visit{a, b, c}, c.Examined))
	require.False(t, has([]exam.Visit{a, b, c}, b.Examined.AddDate(0, 0, 15)))
	closed := b
	closed.State = exam.Closed
	require.False(t, has([]exam.Visit{a, closed, c}, c.Examined))
	d := on(10, f(exam.Wound, 0))
	fs := Scan(dog(), []exam.Visit{a, b, d}, d.Examined)
	n := 0
	for _, x := range fs {
		if x.Rule == "wound" {
			n++
		}
	}
	require.Equal(t, 1, n, "the same flag is not shown twice")
	require.Len(t, History(dog(), []exam.Visit{a, b, d}), 2)
	require.Empty(t, Scan(dog(), nil, day0))
}

// A blind repeat is not compared with the exam it repeats, nor later exams with the repeat.
func TestBlindRepeats(t *testing.T) {
	a := on(0, f(exam.VoluntaryMotor, 4, pl))
	b := on(7, f(exam.VoluntaryMotor, 4, pl), f(exam.Nystagmus, 0))
	again := on(7.1, f(exam.VoluntaryMotor, 2, pl), f(exam.Nystagmus, 2))
	again.RepeatOf = b.ID
	x, ok := flagged(dog(later), "drop", a, b, again)
	require.True(t, ok)
	require.Equal(t, a.Examined, x.From, "compared with the exam before")
	_, ok = flagged(dog(), "brain", b, again)
	require.False(t, ok, "nothing earlier to compare with")
	c := on(14, f(exam.VoluntaryMotor, 2, pl))
	x, ok = flagged(dog(later), "drop", a, b, again, c)
	require.True(t, ok)
	require.Equal(t, b.Examined, x.From)
}

func TestDecline(t *testing.T) {
	a, b := on(0), on(7)
	x, ok := Decline(0.94, a, b)
	require.True(t, ok)
	require.Equal(t, 23, x.Number)
	require.Contains(t, x.Words(), "94 %")
	_, ok = Decline(0.89, a, b)
	require.False(t, ok)
	b.Answers = []exam.Acknowledgement{{Rule: "decline", Told: "Dr L."}}
	x, _ = Decline(0.95, a, b)
	require.False(t, x.Open())
	for _, bad := range []float64{-1, 2} {
		_, ok = Decline(bad, a, b)
		require.False(t, ok)
	}
	require.Equal(t, []string{"soon", "today", "now"}, []string{Soon.String(), Today.String(), Now.String()})
}

// A sound animal raises nothing, week after week.
func TestSoundAnimalIsSilent(t *testing.T) {
	var vs []exam.Visit
	for k := range 5 {
		v := on(float64(7 * k))
		for _, i := range exam.Items() {
			if i.Info().Normal >= 0 {
				v.Findings = append(v.Findings, f(i, i.Info().Normal)...)
			}
		}
		v.Measures = []exam.Measured{measured(exam.Temperature, 38.6), measured(exam.HoursSinceUrination, 3)}
		vs = append(vs, v)
	}
	require.Empty(t, History(dog(disc), vs))
}

// 520 visits are scanned in one go.
func TestLongSeries(t *testing.T) {
	vs := long()
	require.NotPanics(t, func() { Scan(dog(disc), vs, vs[519].Examined) })
	require.NotEmpty(t, History(dog(disc), vs))
}

func long() []exam.Visit {
	rnd := rand.New(rand.NewPCG(1, 2))
	var vs []exam.Visit
	for k := range 520 {
		v := on(0)
		v.ID = exam.ID{byte(k), byte(k >> 8), 9}
		v.Examined = day0.AddDate(0, 0, 7*k)
		for _, i := range exam.Items() {
			if len(v.Findings) < 140 {
				grade := i.Info().First + int8(rnd.IntN(int(i.Last()-i.Info().First)+1))
				v.Findings = append(v.Findings, f(i, grade)...)
			}
		}
		vs = append(vs, v)
	}
	return vs
}

func BenchmarkScan(b *testing.B) {
	vs := long()
	for b.Loop() {
		Scan(dog(disc), vs, vs[519].Examined)
	}
}

func BenchmarkHistory(b *testing.B) {
	vs := long()
	for b.Loop() {
		History(dog(disc), vs)
	}
}

func TestRulesAreSourced(t *testing.T) {
	for _, r := range Rules() {
		require.True(t, len(exam.SourcesIn(r.Source)) > 0 || strings.Contains(r.Source, "from memory"), "%s: %s", r.Key, r.Source)
	}
}

// TestRaisedIsScan: lists and screens tell the same flags.
func TestRaisedIsScan(t *testing.T) {
	vs := long()
	r := rand.New(rand.NewPCG(3, 1))
	raised := 0
	for range 200 {
		from := r.IntN(len(vs) - 12)
		some := slices.Clone(vs[from : from+2+r.IntN(10)])
		for k := range some { // each exam looks at some of the cells
			some[k].Findings = slices.DeleteFunc(slices.Clone(some[k].Findings), func(exam.Finding) bool { return r.IntN(3) == 0 })
			if k > 0 && r.IntN(5) == 0 {
				some[k].RepeatOf = some[k-1].ID
			}
		}
		now := some[len(some)-1].Examined
		full, brief := Scan(dog(disc), some, now), Raised(dog(disc), some, now)
		require.Len(t, brief, len(full))
		for k, f := range full {
			b := brief[k]
			require.Equal(t, []any{f.Rule, f.Urgency, f.Visit, f.CannotRuleOut, f.Open()}, []any{b.Rule, b.Urgency, b.Visit, b.CannotRuleOut, b.Open()})
			require.Empty(t, b.Seen)
			raised++
		}
	}
	require.Greater(t, raised, 500)
}
