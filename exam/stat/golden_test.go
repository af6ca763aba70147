package stat

import (
	"encoding/json"
	"fmt"
	"math"
	"math/big"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
	gstat "gonum.org/v1/gonum/stat"
)

// Reference values of R, SciPy, statsmodels, mpmath and others; versions in the file.

type node = map[string]any

type golden struct {
	ID     string `json:"id"`
	Method string `json:"method"`
	Input  node   `json:"input"`
	Output node   `json:"output"`
}

func readGolden(t testing.TB) []golden {
	raw, err := os.ReadFile(filepath.Join("testdata", "golden.json"))
	require.NoError(t, err)
	var file struct {
		Cases []golden `json:"cases"`
	}
	require.NoError(t, json.Unmarshal(raw, &file))
	return file.Cases
}

// number reads a JSON number, "Inf", "-Inf", "NaN" or a fraction; null is NaN.
func number(t testing.TB, v any) float64 {
	switch v := v.(type) {
	case nil:
		return math.NaN()
	case float64:
		return v
	case string:
		if r, ok := new(big.Rat).SetString(v); ok {
			f, _ := r.Float64()
			return f
		}
		f, err := strconv.ParseFloat(v, 64)
		require.NoError(t, err)
		return f
	}
	t.Fatalf("%v is no number", v)
	return 0
}

func numbers(t testing.TB, v any) []float64 {
	list, ok := v.([]any)
	require.True(t, ok, "%v is no list", v)
	out := make([]float64, len(list))
	for i, x := range list {
		out[i] = number(t, x)
	}
	return out
}

func table(t testing.TB, v any) [][]float64 {
	list, ok := v.([]any)
	require.True(t, ok)
	out := make([][]float64, len(list))
	for i, x := range list {
		out[i] = numbers(t, x)
	}
	return out
}

func whole(t testing.TB, v any) []int {
	f := numbers(t, v)
	out := make([]int, len(f))
	for i := range f {
		out[i] = int(f[i])
	}
	return out
}

// same compares with the relative tolerance that the file states.
func same(t testing.TB, what string, want any, got float64, tolerance ...float64) {
	t.Helper()
	rel := 1e-10
	if len(tolerance) > 0 {
		rel = tolerance[0]
	}
	w := number(t, want)
	if math.IsNaN(w) || math.IsInf(w, 0) {
		if !(math.IsNaN(w) && math.IsNaN(got)) && w != got {
			t.Errorf("%s = %v, want %v", what, got, w)
		}
		return
	}
	if !(math.Abs(got-w) <= 1e-12+rel*math.Abs(w)) {
		t.Errorf("%s = %.17g, want %.17g", what, got, w)
	}
}

func sameList(t testing.TB, what string, want any, got []float64, tolerance ...float64) {
	t.Helper()
	w, ok := want.([]any)
	require.True(t, ok, what)
	require.Len(t, got, len(w), what)
	for i := range w {
		same(t, fmt.Sprintf("%s[%d]", what, i), w[i], got[i], tolerance...)
	}
}

func sameTable(t testing.TB, what string, want any, got [][]float64, tolerance ...float64) {
	t.Helper()
	w := want.([]any)
	require.Len(t, got, len(w), what)
	for i := range w {
		sameList(t, fmt.Sprintf("%s[%d]", what, i), w[i], got[i], tolerance...)
	}
}

// checks runs every golden case by the start of its id. The longest prefix wins.
var checks = map[string]func(*testing.T, golden){
	"mann-kendall-null-n":               checkNull,
	"mann-kendall-untied-":              checkTrend,
	"mann-kendall-tied-":                checkTrend,
	"mann-kendall-constant":             checkTrend,
	"mann-kendall-smallest-two-sided-p": checkSmallest,
	"kendall-tau-b-":                    checkTau,
	"theil-sen-":                        checkSlope,
	"weighted-kappa-":                   checkKappa,
	"icc-":                              checkICC,
	"sem-mdc-":                          checkSEM,
	"reliable-change-index-1":           checkRCI,
	"test-retest-sem":                   checkRetest,
	"page-trend-":                       checkPage,
	"page-trend-rank-sums":              checkPageSums,
	"ewma-nist":                         checkEWMA,
	"cusum-nist":                        checkCUSUM,
	"individuals-chart":                 checkIndividuals,
	"chart-run-lengths":                 checkRunLengths,
	"matrix-exponential-moler-van-loan": checkExp,
	"matrix-exponential-q-dt-":          checkGenerator,
	"hmm-continuous-time-":              checkContinuous,
	"hmm-umbrella":                      checkUmbrella,
	"hmm-three-symbols":                 checkThreeSymbols,
	"log-sum-exp":                       checkLogSumExp,
	"kaplan-meier-":                     checkSurvival,
	"bocpd-gaussian":                    checkBOCPD,
	"bocpd-ordinal":                     checkBOCPD,
	"symmetry-":                         checkSymmetry,
	"sign-test-":                        checkSignTest,
	"proportion-":                       checkShare,
	"library-traps":                     checkTraps,
}

// elsewhere lists the cases of the reference file that other packages test.
var elsewhere = map[string]string{
	"strength-duration-innervated": "package stim", "strength-duration-denervated": "package stim",
	"strength-duration-lapicque": "package stim", "strength-duration-noise-free": "package stim",
}

func TestGolden(t *testing.T) {
	cases := readGolden(t)
	tested := 0
	for id, where := range elsewhere {
		t.Logf("%-45s tested in %s", id, where)
	}
	for _, c := range cases {
		best := ""
		for prefix := range checks {
			if strings.HasPrefix(c.ID, prefix) && len(prefix) > len(best) {
				best = prefix
			}
		}
		t.Run(c.ID, func(t *testing.T) {
			if best == "" {
				t.Fatalf("golden case %s (%s) has no check", c.ID, c.Method)
			}
			checks[best](t, c)
			t.Logf("%-45s %s", c.ID, c.Method)
		})
		tested++
	}
	// 93 cases in all; the four of the strength–duration test stand with that test.
	require.Equal(t, 93, tested+len(elsewhere))
}

func checkNull(t *testing.T, c golden) {
	d := NewNull(ones(int(number(t, c.Input["n"]))))
	same(t, "permutations", c.Output["permutations"], float64(d.Orders().Int64()), 0)
	for _, row := range table(t, c.Output["rows"]) {
		s := int(row[0])
		same(t, "count", row[1], float64(d.Count(s).Int64()), 0)
		same(t, "count at least", row[2], float64(d.atLeast(s).Int64()), 0)
		same(t, "p", row[3], d.AtLeast(s))
	}
}

func checkTrend(t *testing.T, c golden) {
	x := numbers(t, c.Input["series"])
	r := MannKendall(x)
	for name, got := range map[string]float64{
		"S": float64(r.S), "var_S": r.VarS, "var_S_tie_corrected": r.VarS, "tau": r.TauB, "tau_b": r.TauB,
		"p_two_sided_exact": r.P, "p_greater_exact": r.PGreater, "p_less_exact": r.PLess,
		"z_continuity": r.Z, "z_plain": r.ZRaw, "p_two_sided_normal_continuity": r.PNormal, "p_two_sided_normal": r.PNormalRaw,
		"p_two_sided_fraction": r.P, "p_greater_fraction": r.PGreater,
		"T_concordant": float64(r.S+len(x)*(len(x)-1)/2) / 2, "arrangements": float64(NewNull(tieSizes(x)).Orders().Int64()),
	} {
		if want, ok := c.Output[name]; ok {
			same(t, name, want, got)
		}
	}
	if null, ok := c.Output["null_distribution"].(node); ok {
		d := NewNull(tieSizes(x))
		for s, want := range null {
			k, err := strconv.Atoi(s)
			require.NoError(t, err)
			same(t, "count of "+s, want, float64(d.Count(k).Int64()), 0)
		}
	}
}

func checkSmallest(t *testing.T, c golden) {
	for name, v := range c.Output {
		_, list, ok := strings.Cut(name, "ties ")
		require.True(t, ok, name)
		var ties []int
		require.NoError(t, json.Unmarshal([]byte(list), &ties))
		d, want := NewNull(ties), v.(node)
		same(t, name, want["p"], d.SmallestP())
		same(t, name, want["arrangements"], float64(d.Orders().Int64()), 0)
	}
}

func checkTau(t *testing.T, c golden) {
	r := Kendall(numbers(t, c.Input["x"]), numbers(t, c.Input["y"]))
	same(t, "tau-b", c.Output["tau_b"], r.B)
	same(t, "tau-c", c.Output["tau_c"], r.C)
	same(t, "Somers' D", c.Output["somers_d_y_given_x"], r.SomersYX)
	same(t, "p", c.Output["p_asymptotic"], r.P)
}

func checkSlope(t *testing.T, c golden) {
	r := TheilSen(numbers(t, c.Input["x_days"]), numbers(t, c.Input["y"]), number(t, c.Input["confidence"]))
	o := c.Output
	same(t, "slope", o["slope"], r.Slope)
	same(t, "intercept", o["intercept"], r.Intercept)
	same(t, "joint intercept", o["intercept_joint"], r.InterceptJoint)
	same(t, "normal low", o["lower_normal"], r.LowNormal)
	same(t, "normal high", o["upper_normal"], r.HighNormal)
	if e, ok := o["exact"].(node); ok {
		require.True(t, r.Exact)
		same(t, "low", e["lower"], r.Low)
		same(t, "high", e["upper"], r.High)
		same(t, "coverage", e["coverage"], r.Coverage)
		same(t, "low rank", e["lower_rank"], float64(r.LowRank))
		same(t, "high rank", e["upper_rank"], float64(r.HighRank))
	}
}

func checkKappa(t *testing.T, c golden) {
	counts := table(t, c.Input["table"])
	for name, w := range map[string]Weights{"unweighted": Unweighted, "linear": Linear, "quadratic": Quadratic} {
		r := Kappa(counts, w)
		o := c.Output["statsmodels"].(node)
		same(t, name, o[name], r.Kappa)
		same(t, name+" se", o[name+"_std"], r.SE)
		same(t, name+" se0", o[name+"_std0"], r.SEZero)
		same(t, name+" z0", o[name+"_z0"], r.Z)
		same(t, name+" low", o[name+"_lower95"], r.Low)
		same(t, name+" high", o[name+"_upper95"], r.High)
		v := c.Output["vcd"].(node)
		same(t, name+" vcd", v[name], r.Kappa)
		same(t, name+" vcd ase", v[name+"_ase"], r.SE)
		if p, ok := c.Output["psych"].(node)[name]; ok {
			same(t, name+" psych", p, r.Kappa)
		}
	}
	if own, ok := c.Output["cohen_disagreement_weights"]; ok {
		w := table(t, own)
		r := Kappa(counts, func(i, j int) float64 { return w[i][j] })
		same(t, "own weights", c.Output["weighted_kappa_with_those"], r.Kappa)
	}
}

func checkICC(t *testing.T, c golden) {
	r, ok := ICC(table(t, c.Input["ratings"]))
	require.True(t, ok)
	ms := c.Output["mean_squares"].(node)
	same(t, "MSB", ms["MSB"], r.MSB)
	same(t, "MSJ", ms["MSJ"], r.MSJ)
	same(t, "MSE", ms["MSE"], r.MSE)
	same(t, "MSW", ms["MSW"], r.MSW)
	o := func(name string, i int) any { return c.Output[name].([]any)[i] }
	for i, f := range r.Forms {
		same(t, f.Form, o("icc", i), f.Value)
		same(t, f.Form+" F", o("F", i), f.F)
		same(t, f.Form+" df1", o("df1", i), f.DF1)
		same(t, f.Form+" df2", o("df2", i), f.DF2)
		same(t, f.Form+" p", o("p", i), f.P, 1e-9)
		same(t, f.Form+" low", o("lower95", i), f.Low, 1e-9)
		same(t, f.Form+" high", o("upper95", i), f.High, 1e-9)
	}
	same(t, "SEM agreement", c.Output["SEM_agreement"], r.SEMAgreement)
	same(t, "SEM consistency", c.Output["SEM_consistency"], r.SEMConsistency)
	same(t, "MDC agreement", c.Output["MDC95_agreement"], r.MDC95Agreement)
	same(t, "MDC consistency", c.Output["MDC95_consistency"], r.MDC95Consistency)
}

func checkSEM(t *testing.T, c golden) {
	sem := SEM(number(t, c.Input["sd"]), number(t, c.Input["reliability"]))
	same(t, "SEM", c.Output["SEM"], sem)
	same(t, "MDC95", c.Output["MDC95"], MDC95(sem))
	same(t, "MDC90", c.Output["MDC90"], MDC90(sem))
	same(t, "MDC95 rounded", c.Output["MDC95_with_1_96"], 1.96*math.Sqrt2*sem)
}

func checkRCI(t *testing.T, c golden) {
	sem := SEM(number(t, c.Input["sd"]), number(t, c.Input["reliability"]))
	same(t, "S diff", c.Output["S_diff"], math.Sqrt2*sem)
	same(t, "RCI", c.Output["RCI"], ReliableChange(number(t, c.Input["before"]), number(t, c.Input["after"]), sem))
}

func checkRetest(t *testing.T, c golden) {
	r := TestRetest(numbers(t, c.Input["first"]), numbers(t, c.Input["second"]))
	same(t, "mean", c.Output["mean_difference"], r.Mean)
	same(t, "sd", c.Output["sd_difference"], r.SD)
	same(t, "SEM", c.Output["SEM"], r.SEM)
	same(t, "MDC95", c.Output["MDC95"], r.MDC95)
	sameList(t, "limits", c.Output["limits_of_agreement"], []float64{r.Low, r.High})
}

func checkPage(t *testing.T, c golden) {
	r := Page(table(t, c.Input["table"]))
	same(t, "L", c.Output["L"], r.L)
	same(t, "exact p", c.Output["p_exact"], r.PExact)
	same(t, "normal p", c.Output["p_asymptotic"], r.PNormal)
}

func checkPageSums(t *testing.T, c golden) {
	same(t, "L", c.Output["L"], PageL(numbers(t, c.Input["rank_sums"])))
}

func checkEWMA(t *testing.T, c golden) {
	in := c.Input
	r := EWMA(numbers(t, in["x"]), number(t, in["lam"]), number(t, in["start"]), number(t, in["sigma"]), number(t, in["k"]))
	sameList(t, "z", c.Output["ewma"], r.Value)
	sameList(t, "half width", c.Output["exact_half_width"], r.HalfWidth)
	same(t, "limit", c.Output["asymptotic_half_width"], r.Limit)
	same(t, "upper", c.Output["UCL"], r.Value[0]+r.Limit)
	same(t, "lower", c.Output["LCL"], r.Value[0]-r.Limit)
}

func checkCUSUM(t *testing.T, c golden) {
	in := c.Input
	r := CUSUM(numbers(t, in["x"]), number(t, in["target"]), number(t, in["k"]), number(t, in["h"]))
	sameList(t, "upper", c.Output["upper"], r.Upper, 1e-9)
	sameList(t, "lower", c.Output["lower"], r.Lower, 1e-9)
	same(t, "signal", c.Output["first_signal_index_1based"], float64(r.Signal+1))
}

func checkIndividuals(t *testing.T, c golden) {
	r := IndividualsChart(numbers(t, c.Input["x"]))
	same(t, "mean", c.Output["mean"], r.Mean)
	same(t, "moving range", c.Output["mean_moving_range"], r.MovingRange)
	same(t, "sigma", c.Output["sigma_mr"], r.Sigma)
	same(t, "upper", c.Output["UCL"], r.High)
	same(t, "lower", c.Output["LCL"], r.Low)
}

func checkRunLengths(t *testing.T, c golden) {
	o := c.Output
	same(t, "cusum 4", o["cusum_two_k05_h4"], CusumRunLength(0.5, 4, 0, true), 1e-9)
	same(t, "cusum 5", o["cusum_two_k05_h5"], CusumRunLength(0.5, 5, 0, true), 1e-9)
	same(t, "cusum 4, shift 1", o["cusum_two_k05_h4_mu1"], CusumRunLength(0.5, 4, 1, true), 1e-9)
	same(t, "cusum one-sided", o["cusum_one_k05_h4"], CusumRunLength(0.5, 4, 0, false), 1e-9)
	same(t, "ewma", o["ewma_two_l02_c2962"], EwmaRunLength(0.2, 2.962, 0), 1e-9)
	same(t, "ewma, shift 1", o["ewma_two_l02_c2962_mu1"], EwmaRunLength(0.2, 2.962, 1), 1e-9)
}

func rowsOf(m *mat.Dense) [][]float64 {
	r, _ := m.Dims()
	out := make([][]float64, r)
	for i := range out {
		out[i] = m.RawRowView(i)
	}
	return out
}

func checkExp(t *testing.T, c golden) {
	a := table(t, c.Input["A"])
	var e mat.Dense
	e.Exp(mat.NewDense(2, 2, slices.Concat(a...)))
	sameTable(t, "exp", c.Output["expm"], rowsOf(&e))
}

func checkGenerator(t *testing.T, c golden) {
	g, err := NewGenerator(table(t, c.Input["generator_per_day"]))
	require.NoError(t, err)
	p := g.After(number(t, c.Input["days"]))
	sameTable(t, "exp", c.Output["expm"], rowsOf(p))
	for i, want := range numbers(t, c.Output["row_sums"]) {
		same(t, "row sum", want, floats.Sum(p.RawRowView(i)))
	}
}

func checkContinuous(t *testing.T, c golden) {
	in := c.Input
	if _, ok := in["generator_per_day"]; !ok {
		for _, other := range readGolden(t) {
			if other.ID == in["same_model_as"] {
				in = other.Input
			}
		}
	}
	g, err := NewGenerator(table(t, in["generator_per_day"]))
	require.NoError(t, err)
	emission := table(t, in["emission_rows_true_columns_observed"])
	chain := Chain{Initial: numbers(t, in["initial"])}
	var likelihood [][]float64
	observed := c.Input["observed_grade_1to5"].([]any)
	days := numbers(t, c.Input["days"])
	for i := range days {
		if i > 0 {
			chain.Transitions = append(chain.Transitions, g.After(days[i]-days[i-1]))
		}
		l := []float64{1, 1, 1, 1, 1}
		if observed[i] != nil {
			for s := range l {
				l[s] = emission[s][int(number(t, observed[i]))-1]
			}
		}
		likelihood = append(likelihood, l)
	}
	r, err := chain.Smooth(likelihood)
	require.NoError(t, err)
	sameTable(t, "predicted", c.Output["predicted"], r.Predicted)
	sameTable(t, "filtered", c.Output["filtered"], r.Filtered)
	sameTable(t, "smoothed", c.Output["smoothed"], r.Smoothed)
	sameList(t, "scaling", c.Output["scaling"], r.Scaling)
	same(t, "log-likelihood", c.Output["log_likelihood"], r.LogLikelihood)
	path, lp := chain.Viterbi(likelihood)
	for i := range path {
		path[i]++
	}
	require.Equal(t, whole(t, c.Output["viterbi"]), path)
	same(t, "viterbi", c.Output["viterbi_log_probability"], lp)
	if v, ok := c.Output["msm_log_likelihood"]; ok {
		same(t, "msm", v, r.LogLikelihood)
	}
}

func discrete(t *testing.T, c golden, likelihood [][]float64, before bool) Smoothing {
	p := mat.NewDense(2, 2, slices.Concat(table(t, c.Input["transition"])...))
	chain := Chain{Initial: numbers(t, c.Input["initial"])}
	if before {
		start := mat.NewVecDense(2, nil)
		start.MulVec(p.T(), mat.NewVecDense(2, chain.Initial))
		chain.Initial = start.RawVector().Data
	}
	for range len(likelihood) - 1 {
		chain.Transitions = append(chain.Transitions, p)
	}
	r, err := chain.Smooth(likelihood)
	require.NoError(t, err)
	same(t, "log-likelihood", c.Output["log_likelihood"], r.LogLikelihood)
	same(t, "likelihood", c.Output["likelihood"], math.Exp(r.LogLikelihood))
	sameTable(t, "smoothed", c.Output["smoothed"], r.Smoothed)
	return r
}

func checkUmbrella(t *testing.T, c golden) {
	e := table(t, c.Input["emission"])
	var l [][]float64
	for _, o := range whole(t, c.Input["observations"]) {
		l = append(l, []float64{e[0][o], e[1][o]})
	}
	r := discrete(t, c, l, true)
	sameTable(t, "filtered", c.Output["filtered"], r.Filtered)
	sameTable(t, "smoothed", c.Output["smoothed_fractions"], r.Smoothed)
}

func checkThreeSymbols(t *testing.T, c golden) {
	e := table(t, c.Input["emission"])
	var l [][]float64
	for _, o := range c.Input["observations"].([]any) {
		k := slices.Index(c.Input["emission_order"].([]any), o)
		require.GreaterOrEqual(t, k, 0)
		l = append(l, []float64{e[0][k], e[1][k]})
	}
	r := discrete(t, c, l, false)
	sameTable(t, "filtered", c.Output["filtered_fractions"], r.Filtered)
	sameTable(t, "smoothed", c.Output["smoothed_fractions"], r.Smoothed)
	same(t, "likelihood", c.Output["likelihood_fraction"], math.Exp(r.LogLikelihood))
}

func checkLogSumExp(t *testing.T, c golden) {
	want := c.Output["values"].([]any)
	for i, v := range c.Input["cases"].([]any) {
		same(t, fmt.Sprint(v), want[i], LogSumExp(numbers(t, v)))
	}
	require.True(t, math.IsInf(LogSumExp(nil), -1), "an empty sum is minus infinity")
}

func checkSurvival(t *testing.T, c golden) {
	times, status, group := numbers(t, c.Input["time"]), whole(t, c.Input["status_1_event"]), whole(t, c.Input["group"])
	names := map[int]bool{}
	for _, g := range group {
		names[g] = true
	}
	var groups [][]Spell
	for g := 1; g <= len(names); g++ {
		var s []Spell
		for i := range times {
			if group[i] == g {
				s = append(s, Spell{times[i], status[i]})
			}
		}
		groups = append(groups, s)
		want := c.Output["km"].(node)["group_"+strconv.Itoa(g)].(node)
		for name, l := range map[string]Limits{"plain": LimitsPlain, "log": LimitsLog, "log-log": LimitsLogLog} {
			curve := KaplanMeier(s, l)
			same(t, "n", want["n"], float64(curve.N))
			same(t, "events", want["events"], float64(curve.Events))
			col := func(f func(Step) float64) []float64 {
				var out []float64
				for _, st := range curve.Steps {
					out = append(out, f(st))
				}
				return out
			}
			sameList(t, "time", want["time"], col(func(s Step) float64 { return s.Time }))
			sameList(t, "at risk", want["n_risk"], col(func(s Step) float64 { return float64(s.AtRisk) }))
			sameList(t, "events", want["n_event"], col(func(s Step) float64 { return float64(s.Events) }))
			sameList(t, "survival", want["surv"], col(func(s Step) float64 { return s.Survival }))
			sameList(t, "standard error", want["std_err"], col(func(s Step) float64 { return s.SE }))
			ci := want["ci"].(node)[name].(node)
			sameList(t, name+" low", ci["lower"], col(func(s Step) float64 { return s.Low }))
			sameList(t, name+" high", ci["upper"], col(func(s Step) float64 { return s.High }))
			var q, lo, hi []float64
			for _, p := range []float64{0.25, 0.5, 0.75} {
				a, b, c := curve.Quantile(p)
				q, lo, hi = append(q, a), append(lo, b), append(hi, c)
			}
			sameList(t, name+" quantiles", ci["quantiles"], q)
			sameList(t, name+" quantiles low", ci["q_lower"], lo)
			sameList(t, name+" quantiles high", ci["q_upper"], hi)
		}
	}
	want := c.Output["logrank"].(node)
	r := LogRank(groups, 0)
	sameList(t, "observed", want["observed"], r.Observed)
	sameList(t, "expected", want["expected"], r.Expected)
	same(t, "variance", want["variance"], r.Variance)
	same(t, "chi-square", want["chisq"], r.ChiSquare)
	same(t, "df", want["df"], float64(r.DF))
	same(t, "p", want["p"], r.P)
	r = LogRank(groups, 1)
	same(t, "Peto–Peto chi-square", want["peto_peto_rho1_chisq"], r.ChiSquare)
	same(t, "Peto–Peto p", want["peto_peto_p"], r.P)
}

func checkBOCPD(t *testing.T, c golden) {
	h := number(t, c.Input["hazard"])
	var r RunLengths
	if p, ok := c.Input["prior_normal_inverse_gamma"].(node); ok {
		r = ChangePointNormal(numbers(t, c.Input["x"]), h, NormalPrior{number(t, p["mu0"]), number(t, p["kappa0"]), number(t, p["alpha0"]), number(t, p["beta0"])})
	} else {
		r = ChangePointGrades(whole(t, c.Input["y"]), h, numbers(t, c.Input["dirichlet_alpha"]))
	}
	sameTable(t, "run lengths", c.Output["run_length_posterior"], r.Rows, 1e-9)
}

func checkSymmetry(t *testing.T, c golden) {
	s := Compare(number(t, c.Input["left"]), number(t, c.Input["right"]))
	same(t, "index", c.Output["robinson_SI_percent"], s.Index)
	same(t, "deficit", c.Output["deficit_percent_of_larger"], s.Deficit)
	same(t, "ratio", c.Output["ratio_left_right"], s.Ratio)
}

func checkSignTest(t *testing.T, c golden) {
	two, greater := SignTest(int(number(t, c.Input["improved"])), int(number(t, c.Input["worse"])))
	same(t, "two-sided", c.Output["p_two_sided"], two)
	same(t, "greater", c.Output["p_greater"], greater)
}

func checkShare(t *testing.T, c golden) {
	x, n := int(number(t, c.Input["x"])), int(number(t, c.Input["n"]))
	w, e := Wilson(x, n), ClopperPearson(x, n)
	sameList(t, "Wilson", c.Output["wilson95"], []float64{w.Low, w.High})
	sameList(t, "Clopper–Pearson", c.Output["clopper_pearson95"], []float64{e.Low, e.High})
}

// The traps are pinned so that a gonum that behaves otherwise is noticed.
func checkTraps(t *testing.T, c golden) {
	time := numbers(t, c.Input["time"])
	tied := []float64{1, 1, 2, 2, 3}
	same(t, "gonum on ties", c.Output["stat.Kendall, series [1,1,2,2,3]"], gstat.Kendall(time, tied, nil))
	same(t, "gonum on a constant", c.Output["stat.Kendall, constant series"], gstat.Kendall(time, []float64{2, 2, 2, 2, 2}, nil))
	same(t, "gonum without ties", c.Output["stat.Kendall, series [2,1,3,4,5] (no ties)"], gstat.Kendall(time, []float64{2, 1, 3, 4, 5}, nil))
	same(t, "tau-b", c.Output["true tau-b of that series"], Kendall(time, tied).B)
	require.Panics(t, func() { floats.LogSumExp(nil) })
	require.True(t, math.IsInf(floats.LogSumExp([]float64{math.NaN(), math.Inf(-1)}), -1))
}
