package localise

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// TestSmallModel holds the tables against posteriors worked out by R from the specification
// (testdata/small_model.R made testdata/small_model.csv): two segments or nothing wrong, three findings.
func TestSmallModel(t *testing.T) {
	// The parameters of the script, whatever is fitted later.
	p := defaults(exam.Dog)
	p.ReflexUp, p.Pseudo, p.Knee, p.Slip, p.ArcSpread, p.ArcBlunder = 0.5, 0.5, 1.35, 0.03, 1, 0.005
	p.respond[exam.VoluntaryMotor] = response{slope: 14, down: []float64{0.17, 0.38, 0.55, 0.77}}
	p.respond[exam.Patellar] = response{slope: 9, down: []float64{0.33, 0.6}, up: []float64{0.55, 0.9}}
	p.respond[exam.Withdrawal] = response{slope: 12, down: []float64{0.32, 0.65}}
	m, err := newModel(exam.Dog, p)
	if err != nil {
		t.Fatal(err)
	}
	// The three hypotheses of the script in the model's space.
	chosen := [3]int{-1, -1, -1}
	h := 0
	m.sp.each(func(x *hypothesis) {
		plain := x.balance == 0 && !x.central && !x.acute && x.variant == 0 && !x.company
		switch {
		case x.site.kind == NoLesion:
			chosen[0] = h
		case plain && x.site.kind == Cord && x.site.side == Even && x.site.extent == 0 && x.severity == 2:
			switch m.segmentName[x.site.from] {
			case "T12":
				chosen[1] = h
			case "L5":
				chosen[2] = h
			}
		}
		h++
	})
	prior := [3]float64{0.2, 0.5, 0.3}
	f, err := os.Open("testdata/small_model.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 76 {
		t.Fatalf("%d rows, want 75 and a heading", len(rows))
	}
	e := m.Engine()
	worst := 0.0
	for _, row := range rows[1:] {
		var v [6]float64
		for i, s := range row {
			if v[i], err = strconv.ParseFloat(s, 64); err != nil {
				t.Fatal(err)
			}
		}
		x := Exam{Species: exam.Dog}
		for i, item := range []exam.Item{exam.VoluntaryMotor, exam.Patellar, exam.Withdrawal} {
			x.Findings = append(x.Findings, exam.Finding{Item: item, Site: exam.PelvicLeft, Result: exam.Graded(int8(v[i]))})
		}
		e.set(x)
		var post [3]float64
		sum := 0.0
		for i, h := range chosen {
			post[i] = prior[i] * math.Exp(fromLog(e.full[h]))
			sum += post[i]
		}
		for i := range post {
			d := math.Abs(post[i]/sum - v[3+i])
			worst = math.Max(worst, d)
			if d > 1e-8 { // latent values are kept in steps of 2⁻²⁸
				t.Errorf("motor %g, patellar %g, withdrawal %g: hypothesis %d has %.9f, R says %.9f", v[0], v[1], v[2], i, post[i]/sum, v[3+i])
			}
		}
	}
	t.Logf("75 exams, largest difference %.2g", worst)
}
