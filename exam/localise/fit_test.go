package localise

import (
	"flag"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"

	"cordwalk.example/cordwalk/exam"
	"gonum.org/v1/gonum/mat"
)

// The fitting program: go test -run TestFit -fit ./exam/localise (about ten minutes). It sets
// the free parameters by penalised maximum likelihood: the binomial likelihood of every
// published frequency (no row counts for more than a hundred animals), the shared cases with
// a weight of a fifth each, and a pull towards the start value, whose spread is stated. It
// draws nothing at random. The report goes to testdata/fit.txt; the values to params.go.
var fitFlag = flag.Bool("fit", false, "fit the free parameters and write testdata/fit.txt")

const (
	caseWeight = 0.2
	rowCap     = 100
)

// free is one free parameter with its start value and how far it may stray (one standard deviation of the pull).
type free struct {
	name          string
	start, spread float64
	at            func(p *Params) *float64
	cat           bool // of the cat alone
}

func down(i exam.Item, j int) func(p *Params) *float64 {
	return func(p *Params) *float64 { return &p.respond[i].down[j] }
}

func above(i exam.Item, j int) func(p *Params) *float64 {
	return func(p *Params) *float64 { return &p.respond[i].up[j] }
}

func slip(i exam.Item) func(p *Params) *float64 {
	return func(p *Params) *float64 { return &p.respond[i].slip }
}

var freeParams = []free{
	{"FrontFlexion", 1.5, 0.2, func(p *Params) *float64 { return &p.FrontFlexion }, false},
	{"FrontUMN", 0.25, 0.05, func(p *Params) *float64 { return &p.FrontUMN }, false},
	{"WhiteGrey", 0.5, 0.06, func(p *Params) *float64 { return &p.WhiteGrey }, false},
	{"SlipFrail", 0.051, 0.012, func(p *Params) *float64 { return &p.SlipFrail }, false},
	{"Shock", 0.196, 0.05, func(p *Params) *float64 { return &p.Shock }, false},
	{"ShockWithdrawal", 0.466, 0.08, func(p *Params) *float64 { return &p.ShockWithdrawal }, false},
	{"ShockPatellar", 0.122, 0.04, func(p *Params) *float64 { return &p.ShockPatellar }, false},
	{"Central", 0.256, 0.05, func(p *Params) *float64 { return &p.Central }, false},
	{"PainAcute", 0.494, 0.05, func(p *Params) *float64 { return &p.PainAcute }, false},
	{"Voiding", 2.344, 0.4, func(p *Params) *float64 { return &p.Voiding }, false},
	{"Stenosis", 0.776, 0.1, func(p *Params) *float64 { return &p.Stenosis }, false},
	{"CordRoot", 0.134, 0.05, func(p *Params) *float64 { return &p.CordRoot }, false},
	{"Sympathetic", 2.651, 0.9, func(p *Params) *float64 { return &p.Sympathetic }, false},
	{"TrunciWalk", 0.528, 0.08, func(p *Params) *float64 { return &p.TrunciWalk }, false},
	{"TrunciLame", 0.903, 0.04, func(p *Params) *float64 { return &p.TrunciLame }, false},
	{"Sides[even]", 0.475, 0.05, func(p *Params) *float64 { return &p.Sides[0] }, false},
	{"Severity[later][0]", 0.293, 0.06, func(p *Params) *float64 { return &p.Severity[0][0] }, false},
	{"Severity[later][1]", 0.279, 0.06, func(p *Params) *float64 { return &p.Severity[0][1] }, false},
	{"Severity[later][3]", 0.13, 0.03, func(p *Params) *float64 { return &p.Severity[0][3] }, false},
	{"Severity[later][4]", 0.09, 0.03, func(p *Params) *float64 { return &p.Severity[0][4] }, false},
	{"Severity[early][0]", 0.158, 0.04, func(p *Params) *float64 { return &p.Severity[1][0] }, false},
	{"Severity[early][1]", 0.194, 0.04, func(p *Params) *float64 { return &p.Severity[1][1] }, false},
	{"Severity[early][3]", 0.242, 0.05, func(p *Params) *float64 { return &p.Severity[1][3] }, false},
	{"Severity[early][4]", 0.175, 0.05, func(p *Params) *float64 { return &p.Severity[1][4] }, false},
	{"SeverityNeck[later][0]", 0.342, 0.06, func(p *Params) *float64 { return &p.SeverityNeck[0][0] }, false},
	{"SeverityNeck[later][1]", 0.324, 0.06, func(p *Params) *float64 { return &p.SeverityNeck[0][1] }, false},
	{"SeverityNeck[early][0]", 0.166, 0.04, func(p *Params) *float64 { return &p.SeverityNeck[1][0] }, false},
	{"SeverityNeck[early][1]", 0.214, 0.04, func(p *Params) *float64 { return &p.SeverityNeck[1][1] }, false},
	{"Mass[C1-C5][pain]", 0.05, 0.01, func(p *Params) *float64 { return &p.Mass[C1C5][PainOnly] }, false},
	{"Mass[C6-T2][pain]", 0.033, 0.007, func(p *Params) *float64 { return &p.Mass[C6T2][PainOnly] }, false},
	{"Mass[C6-T2][cord], dog", 0.06, 0.008, func(p *Params) *float64 { return &p.Mass[C6T2][Cord] }, false},
	{"Mass[generalised]", 0.05, 0.007, func(p *Params) *float64 { return &p.Mass[GeneralisedRegion][Generalised] }, false},
	{"Mass[peripheral][nerve]", 0.118, 0.012, func(p *Params) *float64 { return &p.Mass[Peripheral][Nerve] }, false},
	{"ambulation[0]", 0.493, 0.05, down(exam.Ambulation, 0), false},
	{"withdrawal-hock[0]", 0.32, 0.08, down(exam.WithdrawalHock, 0), false},
	{"patellar[0]", 0.336, 0.04, down(exam.Patellar, 0), false},
	{"root-signature[0]", 0.526, 0.05, above(exam.RootSignature, 0), false},
	{"spinal-pain[0]", 0.336, 0.03, above(exam.SpinalPain, 0), false},
	{"lumbosacral-extension[0]", 0.331, 0.05, above(exam.LumbosacralExtension, 0), false},
	{"voluntary-urination[0]", 0.559, 0.07, down(exam.VoluntaryUrination, 0), false},
	{"voluntary-urination[1]", 0.599, 0.1, down(exam.VoluntaryUrination, 1), false},
	{"faecal-continence[0]", 0.4, 0.08, down(exam.FaecalContinence, 0), false},
	{"defaecation[0]", 0.75, 0.1, down(exam.Defaecation, 0), false},
	{"tail-tone[1]", 0.492, 0.08, down(exam.TailTone, 1), false},
	{"anal-tone[0]", 0.497, 0.1, down(exam.AnalTone, 0), false},
	{"anal-tone[1]", 0.647, 0.1, down(exam.AnalTone, 1), false},
	{"superficial-pain[1]", 0.737, 0.08, down(exam.SuperficialPain, 1), false},
	{"deep-pain[1]", 0.969, 0.015, down(exam.DeepPain, 1), false},
	{"paw-placement[0]", 0.23, 0.03, down(exam.PawPlacement, 0), false},
	{"sensation-fibular[0]", 0.59, 0.1, down(exam.SensationFibular, 0), false},
	{"sensation-tibial[0]", 0.59, 0.1, down(exam.SensationTibial, 0), false},
	{"stance[0]", 0.393, 0.05, down(exam.Stance, 0), false},
	{"horner[0]", 0.455, 0.05, above(exam.Horner, 0), false},
	{"cranial-tibial slip", 0.056, 0.02, slip(exam.CranialTibial), false},
	{"SunkHock, cat", 0.736, 0.15, func(p *Params) *float64 { return &p.SunkHock }, true},
}

// apply returns the parameters of a species with the free ones set to theta. Thresholds are
// kept in order, shares within bounds.
func apply(s exam.Species, theta []float64) *Params {
	p := defaults(s)
	for i, f := range freeParams {
		if f.cat && s != exam.Cat || strings.HasSuffix(f.name, ", dog") && s != exam.Dog {
			continue
		}
		*f.at(p) = theta[i]
	}
	p.tidy()
	return p
}

// tidy keeps parameters in their bounds.
func (p *Params) tidy() {
	for i := range 2 * len(p.Severity) {
		s := &p.Severity[i/2]
		if i%2 == 1 {
			s = &p.SeverityNeck[i/2]
		}
		s[2] = math.Max(1-s[0]-s[1]-s[3]-s[4], 0.02)
	}
	even := p.Sides[0]
	for i := 1; i < len(p.Sides); i++ {
		share := 1.0 / 3
		if i <= 2 {
			share = 1.0 / 6
		}
		p.Sides[i] = (1 - even) * share
	}
	for i := range p.respond {
		r := &p.respond[i]
		for j := 1; j < len(r.down); j++ {
			r.down[j] = math.Max(r.down[j], r.down[j-1]+0.02)
		}
		for j := 1; j < len(r.up); j++ {
			r.up[j] = math.Max(r.up[j], r.up[j-1]+0.02)
		}
	}
}

// residuals are standardised: rows, then cases, then the pull. Cases may be left as they
// were: they are dear to weigh.
func residuals(t testing.TB, theta []float64, cases []sharedCase, kept []float64) []float64 {
	dog, cat := apply(exam.Dog, theta), apply(exam.Cat, theta)
	var out []float64
	for _, m := range measure(dog, cat) {
		out = append(out, rowResidual(m))
	}
	if kept != nil {
		out = append(out, kept[len(out):len(out)+len(cases)]...)
	} else {
		for _, p := range caseProbabilities(t, dog, cat, cases) {
			out = append(out, math.Sqrt(2*caseWeight*-math.Log(math.Max(p, 1e-6))))
		}
	}
	for i, f := range freeParams {
		out = append(out, (theta[i]-f.start)/f.spread)
	}
	return out
}

// rowResidual is the signed root of the binomial deviance. Rows argued to lie outside do not pull.
func rowResidual(m measured) float64 {
	if m.out != "" {
		return 0
	}
	n := math.Min(float64(m.n), rowCap)
	q := float64(m.k) / float64(m.n)
	p := math.Min(math.Max(m.predicted, 1e-6), 1-1e-6)
	d := 0.0
	if q > 0 {
		d += q * math.Log(q/p)
	}
	if q < 1 {
		d += (1 - q) * math.Log((1-q)/(1-p))
	}
	return math.Copysign(math.Sqrt(math.Max(2*n*d, 0)), p-q)
}

// caseProbabilities returns the probability that each case's confirmed regions get.
func caseProbabilities(t testing.TB, dog, cat *Params, cases []sharedCase) []float64 {
	eng := map[exam.Species]*Engine{}
	for s, p := range map[exam.Species]*Params{exam.Dog: dog, exam.Cat: cat} {
		m, err := newModel(s, p)
		if err != nil {
			t.Fatal(err)
		}
		eng[s] = m.Engine()
	}
	out := make([]float64, len(cases))
	for i := range cases {
		x := cases[i].presenceExam(t)
		r, err := eng[x.Species].Posterior(x)
		if err != nil {
			t.Fatal(err)
		}
		for _, region := range cases[i].regions {
			out[i] += r.Region(region)
		}
	}
	return out
}

func sumSquares(r []float64) float64 {
	s := 0.0
	for _, v := range r {
		s += v * v
	}
	return s
}

// step solves one Gauss–Newton step with damping.
func step(jac *mat.Dense, r []float64, damping float64) []float64 {
	_, n := jac.Dims()
	var a mat.Dense
	a.Mul(jac.T(), jac)
	for i := range n {
		a.Set(i, i, a.At(i, i)*(1+damping)+1e-9)
	}
	g := mat.NewVecDense(n, nil)
	g.MulVec(jac.T(), mat.NewVecDense(len(r), r))
	var d mat.VecDense
	if err := d.SolveVec(&a, g); err != nil {
		return make([]float64, n)
	}
	out := make([]float64, n)
	for i := range out {
		out[i] = -d.AtVec(i)
	}
	return out
}

// jacobian by differences. The cases' part is taken from an earlier one where there is one.
func jacobian(t testing.TB, theta, r []float64, cases []sharedCase, earlier *mat.Dense) *mat.Dense {
	j := mat.NewDense(len(r), len(theta), nil)
	kept := r
	if earlier == nil {
		kept = nil
	}
	for i, f := range freeParams {
		h := 0.15 * f.spread
		moved := append([]float64(nil), theta...)
		moved[i] += h
		for k, v := range residuals(t, moved, cases, kept) {
			j.Set(k, i, (v-r[k])/h)
		}
		if earlier != nil {
			for k := range cases {
				j.Set(len(publishedRows)+k, i, earlier.At(len(publishedRows)+k, i))
			}
		}
	}
	return j
}

func TestFit(t *testing.T) {
	if !*fitFlag {
		t.Skip("run with -fit to fit the parameters again")
	}
	cases := loadCases(t)
	theta := make([]float64, len(freeParams))
	for i, f := range freeParams {
		theta[i] = f.start
	}
	r := residuals(t, theta, cases, nil)
	start := sumSquares(r)
	fmt.Printf("start: penalised deviance %.2f\n", start)
	var jac *mat.Dense
	damping := 0.05
	for round := range 2 {
		jac = jacobian(t, theta, r, cases, jac)
		better := false
		for try := 0; try < 4 && !better; try++ {
			next := append([]float64(nil), theta...)
			for i, d := range step(jac, r, damping) {
				f := freeParams[i]
				d = math.Max(-1.5*f.spread, math.Min(1.5*f.spread, d))
				next[i] = math.Max(next[i]+d, 0.2*f.start)
			}
			nr := residuals(t, next, cases, nil)
			if sumSquares(nr) < sumSquares(r) {
				better = true
				theta, r = next, nr
				damping /= 3
			} else {
				damping = damping*4 + 0.1
			}
		}
		fmt.Printf("round %d: %.2f\n", round+1, sumSquares(r))
		for i, f := range freeParams {
			fmt.Printf("  %s %.3f", f.name, theta[i])
		}
		fmt.Println()
		if !better {
			break
		}
	}
	for i := range theta {
		theta[i] = math.Round(theta[i]*1000) / 1000
	}
	dog, cat := apply(exam.Dog, theta), apply(exam.Cat, theta)
	var b strings.Builder
	fmt.Fprintf(&b, "Fit of the localisation model (go test -run TestFit -fit ./exam/localise).\n\n")
	fmt.Fprintf(&b, "Penalised deviance %.2f at the start, %.2f fitted. Case weight %.1f; no row counts for more than %d animals.\n\n", start, sumSquares(residuals(t, theta, cases, nil)), caseWeight, rowCap)
	fmt.Fprintf(&b, "parameter                   start   spread   fitted\n")
	for i, f := range freeParams {
		fmt.Fprintf(&b, "%-26s %6.3f   %6.3f   %6.3f\n", f.name, f.start, f.spread, theta[i])
	}
	fmt.Fprintf(&b, "\nPublished frequencies\n%s", table(measure(dog, cat)))
	fmt.Fprintf(&b, "\nShared cases: probability of the confirmed region, all fitted, and with the case left out of the fit\n")
	probs := caseProbabilities(t, dog, cat, cases)
	left := leaveOneOut(t, theta, cases, jac)
	for i := range cases {
		fmt.Fprintf(&b, "%-40s %.3f  %.3f\n", cases[i].ID, probs[i], left[i].probability)
	}
	first, two, brier := 0, 0, 0.0
	for _, l := range left {
		if l.first {
			first++
		}
		if l.two {
			two++
		}
		brier += l.brier
	}
	fmt.Fprintf(&b, "left out: first in %d, first two in %d of %d; Brier score %.3f\n", first, two, len(cases), brier/float64(len(cases)))
	if err := os.WriteFile("testdata/fit.txt", []byte(b.String()), 0o644); err != nil {
		t.Fatal(err)
	}
	fmt.Print(b.String())
}

type leftOut struct {
	probability, brier float64
	first, two         bool
}

// leaveOneOut refits by one Gauss–Newton step without each case in turn.
func leaveOneOut(t testing.TB, theta []float64, cases []sharedCase, jac *mat.Dense) []leftOut {
	r := residuals(t, theta, cases, nil)
	var out []leftOut
	for i := range cases {
		without := append([]float64(nil), r...)
		j := mat.DenseCopyOf(jac)
		row := len(publishedRows) + i
		without[row] = 0
		for k := range theta {
			j.Set(row, k, 0)
		}
		moved := append([]float64(nil), theta...)
		for k, d := range step(j, without, 0.01) {
			f := freeParams[k]
			moved[k] += math.Max(-f.spread, math.Min(f.spread, d))
		}
		s, _ := exam.ParseSpecies(cases[i].Species)
		m, err := newModel(s, apply(s, moved))
		if err != nil {
			t.Fatal(err)
		}
		res, err := m.Engine().Posterior(cases[i].presenceExam(t))
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, score(&cases[i], res))
	}
	return out
}

// score says how a result does on a case. The Brier score is over the eight regions; where
// a second region is equally fair, what falls on it counts to the first.
func score(c *sharedCase, r *Result) leftOut {
	var l leftOut
	hit := func(region string) bool {
		for _, x := range c.regions {
			if x == region {
				return true
			}
		}
		return false
	}
	for k, x := range r.Regions {
		if hit(x.Region) {
			l.probability += x.Probability
			if k == 0 {
				l.first = true
			}
			if k <= 1 {
				l.two = true
			}
		} else {
			l.brier += x.Probability * x.Probability
		}
	}
	l.brier += (1 - l.probability) * (1 - l.probability)
	return l
}
