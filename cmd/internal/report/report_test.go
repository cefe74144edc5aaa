package report_test

import (
	"context"
	"encoding/json"
	"io"
	"math"
	"os"
	"regexp"
	"strings"
	"testing"
	"unicode/utf8"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

func ptr[T any](v T) *T { return &v }

var nan = diagnostics.Real(math.NaN())

func est(v, u, lo, hi float64) diagnostics.Estimate {
	return diagnostics.Estimate{Value: diagnostics.Real(v), StdError: diagnostics.Real(u), Lower: diagnostics.Real(lo), Upper: diagnostics.Real(hi)}
}

// fixture is an assessment with every field filled, of numbers made up for the
// layout: they belong to no data.
func fixture() *diagnostics.Assessment {
	open := est(31, math.NaN(), math.NaN(), 44)
	open.Open = ptr("lower")
	unknown := diagnostics.NewEstimate(fit.Unknown())
	param := func(symbol, unit string, e diagnostics.Estimate) diagnostics.ParameterEstimate {
		return diagnostics.ParameterEstimate{Symbol: symbol, Name: symbol, Unit: unit, Estimate: e}
	}
	return &diagnostics.Assessment{
		Schema: diagnostics.Schema,
		Tool:   diagnostics.Tool{Name: "onebarrier", Version: "(devel)"},
		Settings: diagnostics.Settings{Seed: 1, Resamples: 9999, NullDraws: diagnostics.NullsFull, Scheme: "residual", Confidence: 0.95, ErrorModel: fit.Relative,
			ErrorModelWhy: "no uncertainties are stated", Replicates: "means", Sources: "offsets", Criterion: "aicc", PrefactorBand: [2]float64{0, 1},
			ToleranceKJ: 3, Tolerance: "", Models: []string{"straight", "parallel"}, ReferenceTemperature: 298.15, EnergyUnit: "kJ/mol", Intervals: []string{"bootstrap-t"},
			PublishStyle: "molar", Assumed: []string{"T=degC"}, Selection: []string{"--t-max=400K"}},
		Dataset: diagnostics.DatasetInfo{Name: "made up", Files: []string{"made up.csv"}, SHA256: strings.Repeat("0a", 32), Points: 9, Used: 8,
			Temperatures: 7, TMin: 283.15, TMax: 338.15, TEff: 308.7, Quantity: diagnostics.Quantity{Symbol: "k_obs", Unit: "s^-1", DimensionKnown: true},
			Sources: []string{"Lab1"}, Limits: 1},
		Influence: []diagnostics.Influence{{LeftOut: "temperature", Rows: []int{2}, T: 283.15, Leverage: 0.4, Cook: 0.1, Studentised: nan, OutlierP: nan,
			Exponent: 3, StdError: 2, PValue: 0.2, State: diagnostics.Unresolved, Deciding: true}},
		TemperatureError: []diagnostics.TemperatureError{{Shape: "bow", Slope: 12, ToBand: nan, Lost: 0.05, Working: 0.1, Explains: true}},
		RunOrder:         &diagnostics.RunOrder{Points: 8, Temperature: 0.1, Residual: nan, PValue: nan},
		Columns:          []diagnostics.Column{{Heading: "t/°C", Role: "temperature", Unit: "°C", Factor: 1}},
		Data: []diagnostics.Datum{
			{Row: 2, T: 283.15, K: 1e-5, UK: nan, Source: "Lab1", Used: true, Residual: 0.01},
			{Row: 3, T: 293.15, K: nan, UK: nan, Limit: "<", WhyNot: "a bound: not fitted yet", Residual: nan},
		},
		Verdict: diagnostics.Verdict{State: diagnostics.BeyondPrefactor, ETrend: "rises", Material: ptr(true),
			Sentence:         "Curved: more than one constant barrier with a usual prefactor gives. E rises with T, by 18.2 kJ/mol (12.1 to 24.3) between 283.1 and 338.1 K. This does not by itself prove a second barrier: a parallel path or tunnelling can make E rise.",
			RecommendedCurve: "parallel"},
		Curvature: diagnostics.Curvature{Basis: "temperature-means", Exponent: est(39.8, 5.4, 26.5, 53.1), EChange: est(18.2, 2.5, 12.1, 24.3),
			PValue: 0.00032, PBand: 0.00041, PScaleFree: 0.08, Detectable: est(9.1, math.NaN(), 6.2, 15.4), ToleranceKJ: 3, Nu: 4,
			Pointwise:     &diagnostics.Pointwise{Exponent: est(38, 5, 27, 49), EChange: est(17, 2, 13, 21), PValue: 0.0001, PBand: 0.0002},
			SecondBarrier: &diagnostics.SecondBarrier{Statistic: 5.1, PValue: 0.0004, Draws: 19999, Crossover: [2]diagnostics.Real{301, 322}, WithoutEnds: diagnostics.WithoutEnds{PWithoutTMax: 0.3, PWithoutTMin: nan}},
			ELocTMin:      est(40, 2, 36, 44), ELocTMax: est(58, 2, 54, 62)},
		Ranking: []diagnostics.Ranked{
			{Family: "parallel", Curve: "parallel", Status: "ranked", Params: 4, Points: 8, LogLik: 80.1, RSS: 0.001, Chi2: nan, Sigma: 0.02, AIC: -150.2, AICc: -110.2, BIC: -151,
				Delta: 0, FamWeight: 0.93, Weight: 0.93, InSet: true, RepeatShare: 0.81, Adequacy: []diagnostics.Adequacy{{Test: "runs", Statistic: 4, PValue: 0.7}}, Adequate: ptr(true),
				Forms: []diagnostics.FormEstimate{{Model: "parallel-barriers", TRef: nan, Parameters: []diagnostics.ParameterEstimate{
					param("ln_A1", "s^-1", unknown), param("E1", "kJ mol^-1", open), param("ln_A2", "s^-1", est(24.31, 0.62, 22, 26)), param("E2", "kJ mol^-1", est(71.22, 1.1, 68, 74)), param("T_x", "K", est(311.2, 4.4, 300, 322))},
					Covariance: [][]diagnostics.Real{{nan}}}}},
			{Family: "power", Curve: "power-prefactor", Status: "fitted", Reason: "AICc undefined: needs N ≥ 8", Params: 3, Points: 7, LogLik: 70, RSS: 0.01, Chi2: nan, Sigma: 0.05, AIC: -132, AICc: nan, BIC: -131,
				Delta: nan, FamWeight: nan, Weight: nan, RepeatShare: nan, Adequacy: []diagnostics.Adequacy{}, Forms: []diagnostics.FormEstimate{
					{Model: "modified-arrhenius", TRef: 298.15, Parameters: []diagnostics.ParameterEstimate{param("ln_A", "s^-1", est(5, 2, 1, 9)), param("n", "1", est(39.8, 5.4, 26, 53)), param("E", "kJ mol^-1", est(-55, 13, -90, -20))}, Covariance: [][]diagnostics.Real{{1}}},
					{Model: "eyring-heat-capacity", TRef: 298.15, Withheld: "the unit of k is not understood", Parameters: []diagnostics.ParameterEstimate{}, Covariance: [][]diagnostics.Real{}}}},
			{Family: "fixed-exponent", Curve: "straight", Status: "excluded", Reason: "made up to show an excluded curve", Params: 2, Points: 7, LogLik: nan, RSS: nan, Chi2: nan, Sigma: nan, AIC: nan, AICc: nan, BIC: nan,
				Delta: nan, FamWeight: nan, Weight: nan, RepeatShare: nan, Adequacy: []diagnostics.Adequacy{}, Forms: []diagnostics.FormEstimate{}},
		},
		LocalEnergies: []diagnostics.EnergyBetween{},
		AtReference:   diagnostics.AtReference{T: 298.15, K: est(2.1e-4, 1e-6, 2e-4, 2.2e-4), F: 1.01, G: 40, Curve: "parallel"},
		Publish: diagnostics.Publish{Style: "molar", Curve: "parallel",
			Lines: []diagnostics.PublishLine{{Symbol: "E2", Unit: "kJ/mol", Estimate: est(71.22, 1.1, 68, 74), Text: "71.2(1.1) kJ/mol", Note: "of the path with the higher barrier"},
				{Symbol: "E1", Unit: "kJ/mol", Estimate: open, Note: "not identified: the data do not reach cold enough to see this path alone"}},
			Notes: []string{"brackets hold the standard uncertainty"}},
		Bootstrap: &diagnostics.Resampling{Scheme: "residual", Resamples: 9999, Failed: 3,
			RepeatShare: map[diagnostics.State]diagnostics.Real{diagnostics.BeyondPrefactor: 0.97, diagnostics.CurvedOpen: 0.028, diagnostics.Unresolved: 0.002},
			Intervals:   []diagnostics.ResampledInterval{{Curve: "power-prefactor", Parameter: "n", Unit: "1", Method: "bootstrap-t", Lower: 25, Upper: 54}}},
		Findings: []diagnostics.Finding{
			{Code: "conditional-on-choice", Severity: diagnostics.Info, Message: "intervals are conditional on the curve that was chosen", Rows: []int{}, Values: map[string]diagnostics.Real{}},
			{Code: "adequacy-unchecked", Severity: diagnostics.Info, Message: "the fit cannot be checked", Cure: "repeat some temperatures", Rows: []int{}, Values: map[string]diagnostics.Real{}},
			{Code: "deciding-point", Severity: diagnostics.Alarm, Message: "the verdict rests on one point", Cure: "measure there again", Rows: []int{9}, Values: map[string]diagnostics.Real{"p": 0.2, "n": nan}},
		},
	}
}

func text(t *testing.T, a *diagnostics.Assessment, opt report.Text) string {
	t.Helper()
	var b strings.Builder
	if err := report.WriteAssessment(&b, a, nil, opt); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestAssessmentFitsThePage(t *testing.T) {
	for _, w := range []int{0, 80, 100} {
		want := w
		if w == 0 {
			want = 80
		}
		for i, l := range strings.Split(text(t, fixture(), report.Text{Width: w}), "\n") {
			if n := utf8.RuneCountInString(l); n > want && strings.Contains(strings.TrimSpace(l), " ") {
				t.Errorf("width %d: line %d has %d columns: %q", w, i+1, n, l)
			}
		}
	}
}

// The order in which a reader in a hurry needs it.
func TestAssessmentOrder(t *testing.T) {
	out := text(t, fixture(), report.Text{})
	if !strings.HasPrefix(out, "verdict   Curved:") {
		t.Errorf("the verdict does not come first:\n%s", out)
	}
	at := 0
	for _, head := range []string{"verdict", "publish", "test", "ranking", "findings", "data", "next"} {
		i := strings.Index("\n"+out, "\n"+head+" ")
		if i < at {
			t.Errorf("section %q is missing or out of order:\n%s", head, out)
		}
		at = i
	}
	if a, i := strings.Index(out, "deciding-point"), strings.Index(out, "adequacy-unchecked"); a < 0 || i < a {
		t.Errorf("an alarm comes after what is only informative:\n%s", out)
	}
}

// Unknown is a dash with its reason: never 0, never blank, never NaN.
func TestUnknownIsADash(t *testing.T) {
	out := text(t, fixture(), report.Text{})
	for _, bad := range []string{"NaN", "Inf", "<nil>", "%!"} {
		if strings.Contains(out, bad) {
			t.Errorf("the text holds %q:\n%s", bad, out)
		}
	}
	for _, want := range []string{"AICc undefined: needs N ≥ p + 3", "straight is excluded: made up", "E1  –", "line 3 left out: a bound"} {
		if !strings.Contains(strings.Join(strings.Fields(out), " "), strings.Join(strings.Fields(want), " ")) {
			t.Errorf("the text does not hold %q:\n%s", want, out)
		}
	}
	if regexp.MustCompile(`power-prefactor +3 +−132.00† +– +– +– +– +–`).FindString(out) == "" {
		t.Errorf("the row of a curve without AICc has no dashes:\n%s", out)
	}
}

func TestNothingKnown(t *testing.T) {
	a := fixture()
	u := diagnostics.NewEstimate(fit.Unknown())
	a.Verdict = diagnostics.Verdict{State: diagnostics.Untestable, ETrend: "none", Sentence: "Too few temperatures to test."}
	a.Curvature = diagnostics.Curvature{Basis: "points", Exponent: u, EChange: u, PValue: nan, PBand: nan, PScaleFree: nan, Detectable: u, ToleranceKJ: nan, ELocTMin: u, ELocTMax: u}
	a.Bootstrap, a.Findings = nil, nil
	out := text(t, a, report.Text{})
	if strings.Contains(out, "NaN") || strings.Contains(out, "\ntest ") {
		t.Errorf("a test that was not run is printed:\n%s", out)
	}
}

// holds reports what of a text is missing, blanks apart.
func holds(t *testing.T, out string, wants ...string) {
	t.Helper()
	flat := strings.Join(strings.Fields(out), " ")
	for _, want := range wants {
		if !strings.Contains(flat, want) {
			t.Errorf("the text does not hold %q:\n%s", want, out)
		}
	}
}

// Readings stand beside rivals of the published curve, with the unit in the
// logarithm, intervals where an end is open, and why a crossover is unknown.
func TestFormsOfRivals(t *testing.T) {
	a := fixture()
	if out := text(t, a, report.Text{}); strings.Contains(out, "parallel-barriers") {
		t.Errorf("the published curve is read twice:\n%s", out)
	}
	a.Publish.Curve = "straight"
	a.Ranking[0].Forms[0].Parameters[4].Estimate = diagnostics.NewEstimate(fit.Unknown())
	holds(t, text(t, a, report.Text{}), "· parallel-barriers ln(A1/s^-1) –, E1 31 kJ/mol (open to 44), ln(A2/s^-1) 24.31(62), E2 71.2(1.1) kJ/mol, T_x – (E1 open)", "(a to b): 95 % interval")
	a.Ranking[0].Forms[0].Withheld = "made up"
	holds(t, text(t, a, report.Text{}), "parallel-barriers – made up")
	a.Ranking[0].Adequate = ptr(false)
	if out := text(t, a, report.Text{}); strings.Contains(out, "parallel-barriers") {
		t.Errorf("the parameters of a rejected curve are printed:\n%s", out)
	}
}

// Numbers of the fixture.
func TestTestBlock(t *testing.T) {
	a := fixture()
	out := text(t, a, report.Text{})
	holds(t, out, "• parallel 4", "•: the 95 % set", "†: AIC, AICc undefined",
		"runs of residuals 4 of 7, p = 0.70 (parallel)",
		"n = +38.0, p = 0.00010; change of E +17.0 kJ/mol (95 %: +13.0 to +21.0)",
		"seen with 80 % power 9.1 (6.2 to 15.4) kJ/mol",
		"false alarm, straight data 7–8 %")
	if strings.Contains(out, "• power-prefactor") {
		t.Errorf("a curve outside the 95 %% set is marked:\n%s", out)
	}
	if strings.Contains(out, "by the curve of the test") {
		t.Errorf("the change of E is told twice:\n%s", out)
	}
	a.Bootstrap.Intervals = append(a.Bootstrap.Intervals, diagnostics.ResampledInterval{Parameter: "change_of_E", Method: "bootstrap-t", Lower: 13, Upper: 21})
	a.Verdict.EChange, a.Verdict.EChangeCurve = est(22.5, 1.0, 20.5, 24.5), "parallel"
	holds(t, text(t, a, report.Text{}), "change of E by parallel +22.5 kJ/mol (95 %: +20.5 to +24.5) by the curve of the test +",
		"kJ/mol (power-prefactor)")
	a.Curvature.SecondBarrier.PValue = 1. / 20000
	a.Curvature.SecondBarrier.Crossover[1] = a.Dataset.TMax
	holds(t, text(t, a, report.Text{}), "second barrier, E rising p ≤ 5.0×10⁻⁵, crossover above 301 K")
	a.Dataset.Temperatures = 4
	a.Curvature.Detectable = est(math.NaN(), math.NaN(), 6.2, 15.4) // ν <= 2: σ is too badly known
	holds(t, text(t, a, report.Text{}), "seen with 80 % power 6.2 to 15.4 kJ/mol", "false alarm, straight data 9 %")
	a.Curvature.Detectable = est(5.07, math.NaN(), 5.07, 5.07) // σ known
	holds(t, text(t, a, report.Text{}), "seen with 80 % power 5.07 kJ/mol")
	a.Verdict.RecommendedCurve, a.Curvature.SecondBarrier = "", nil
	if out := text(t, a, report.Text{}); strings.Contains(out, "runs of") || strings.Contains(out, "false alarm") {
		t.Errorf("tests that were not made are printed:\n%s", out)
	}
}

// What the bootstrap withholds is a dash with its reason, and what was found wanting of
// an interval is said beside it.
func TestWithheldResamples(t *testing.T) {
	a := fixture()
	a.Bootstrap = &diagnostics.Resampling{Scheme: "pairs", Resamples: 1000, Failed: 570, RepeatShare: map[diagnostics.State]diagnostics.Real{},
		Intervals: []diagnostics.ResampledInterval{
			{Parameter: "change_of_E", Method: "bootstrap-t", Lower: nan, Upper: nan, Note: "withheld: 570 of 1000 resamples could not be fitted"},
			{Parameter: "change_of_E", Method: "percentile", Lower: 12, Upper: 24, Note: "too short below N = 20"}}}
	holds(t, text(t, a, report.Text{}), "change of E by bootstrap-t – (withheld: 570 of 1000 resamples could not be fitted)",
		"change of E by percentile +12.0 to +24.0 kJ/mol (too short below N = 20)",
		"a repeat would say – (570 of 1000 resamples failed)")
}

// Alarms are printed with their cure, what is informative without, and what stands
// elsewhere not again.
func TestFindingsAreShort(t *testing.T) {
	a := fixture()
	out := text(t, a, report.Text{})
	holds(t, out, "ALARM deciding-point: the verdict rests on one point (line 9) → measure there again", "adequacy-unchecked: the fit cannot be checked")
	if strings.Contains(out, "repeat some temperatures") || strings.Contains(out, "conditional-on-choice") {
		t.Errorf("not short:\n%s", out)
	}
	// The word line is no place: its number is still printed, and only once.
	for message, want := range map[string]string{
		"the point lies far from the straight line":       "from the straight line (line 9) →",
		"outlines, deadlines 9 and line-ups name no line": "name no line (line 9) →",
		"line 9 was joined to the headings":               "line 9 was joined to the headings →",
		"limits in lines 9, 12":                           "limits in lines 9, 12 →",
	} {
		b := fixture()
		b.Findings[2].Message = message
		holds(t, text(t, b, report.Text{}), want)
	}
	// A row is a line: one number is enough.
	b := fixture()
	for i := range b.Findings {
		if b.Findings[i].Code == "deciding-point" {
			b.Findings[i].Message = "the verdict rests on row 9 at 353 K"
		}
	}
	if out := text(t, b, report.Text{}); strings.Contains(out, "(line 9)") || !strings.Contains(out, "row 9") {
		t.Errorf("the row is named twice, or not:\n%s", out)
	}
	for i := range a.Findings {
		a.Findings[i].Severity = diagnostics.Warning
	}
	holds(t, text(t, a, report.Text{}), "WARNING conditional-on-choice: ", "→ repeat some temperatures")
}

// Read in half a minute: sixty lines for the straight demonstration set.
func TestAssessmentIsShort(t *testing.T) {
	const file = "../../../testdata/demo/ester-straight.csv"
	f, err := os.Open(file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	sets, err := dataset.Read(file, f, dataset.Options{})
	if err != nil {
		t.Fatal(err)
	}
	o := diagnostics.DefaultOptions()
	o.Resamples = 199
	a, err := diagnostics.Assess(context.Background(), sets[0], o)
	if err != nil {
		t.Fatal(err)
	}
	out := text(t, a, report.Text{})
	if n := strings.Count(out, "\n"); n > 60 {
		t.Errorf("%d lines:\n%s", n, out)
	}
}

// Colour adds nothing but colour.
func TestColourCarriesNoMeaning(t *testing.T) {
	plain := text(t, fixture(), report.Text{})
	coloured := text(t, fixture(), report.Text{Colour: true})
	if plain == coloured || regexp.MustCompile("\x1b\\[[0-9;]*m").ReplaceAllString(coloured, "") != plain {
		t.Errorf("colour changes the text:\n%s", coloured)
	}
	if strings.Contains(plain, "\x1b") {
		t.Error("escapes without colour")
	}
}

func TestSchemasHold(t *testing.T) {
	point := dataset.Point{Row: 2, T: 300, K: 1, Used: true, Order: math.NaN()}
	set := &dataset.Set{Name: "s", Points: []dataset.Point{point, {Row: 3, WhyNot: "n.d.", K: math.NaN()}},
		Columns: []dataset.Column{{Index: 1, Heading: "T/K", Role: "temperature", Factor: 1}}, Notices: []dataset.Notice{{Code: "few", Message: "m"}}}
	bare := fixture()
	bare.Bootstrap, bare.Curvature.Pointwise, bare.Curvature.SecondBarrier, bare.Verdict.Material = nil, nil, nil, nil
	for name, docs := range map[string][]any{
		"assessment": {fixture(), bare},
		"models":     {report.NewModels(models.All())},
		"findings":   {report.NewFindings(diagnostics.Catalogue())},
		"inspect": {report.Inspection{Schema: report.InspectSchema, Tool: diagnostics.Tool{Name: "onebarrier", Version: "v"},
			Files: []report.InspectedFile{report.NewInspectedFile("f", "", nil, []*dataset.Set{set})}, Problems: []report.Problem{{Code: "c", Message: "m"}}}},
		"problems": {report.Problems{Schema: report.ProblemsSchema, Problems: []report.Problem{{Code: "c", Message: "m", Row: ptr(3)}, {Message: "m"}}}},
	} {
		for _, doc := range docs {
			var b strings.Builder
			if err := report.JSON(&b, doc); err != nil {
				t.Fatal(err)
			}
			if err := schematest.Validate(name, []byte(b.String())); err != nil {
				t.Errorf("%s: %v", name, err)
			}
		}
	}
}

// The check of documents is seen to fail: on an unknown name, a missing one, a
// wrong type, a word outside its list, NaN written as a word, two documents.
func TestSchemaFindsBrokenDocuments(t *testing.T) {
	var b strings.Builder
	if err := report.JSON(&b, fixture()); err != nil {
		t.Fatal(err)
	}
	good := b.String()
	for what, c := range map[string][2]string{
		"unknown name":    {`"sentence":`, `"sentense":`},
		"unknown, deeper": {`"in_95_percent_set":`, `"in_set":`},
		"wrong type":      {`"points": 9`, `"points": "9"`},
		"word not listed": {`"state": "beyond-prefactor"`, `"state": "curved"`},
		"open end":        {`"open": "lower"`, `"open": "left"`},
		"schema":          {`assessment/1`, `assessment/2`},
		"p beyond 1":      {`"p_band": 0.00041`, `"p_band": 1.2`},
		"share's state":   {`"beyond-prefactor": 0.97`, `"bent": 0.97`},
		"NaN":             {`"delta": 0`, `"delta": "NaN"`},
	} {
		broken := strings.Replace(good, c[0], c[1], 1)
		if broken == good {
			t.Fatalf("%s: the document does not hold %q", what, c[0])
		}
		if schematest.Validate("assessment", []byte(broken)) == nil {
			t.Errorf("%s: a broken document passes", what)
		}
	}
	if schematest.Validate("assessment", []byte(good+good)) == nil {
		t.Error("two documents pass as one")
	}
	var doc map[string]any
	if err := json.Unmarshal([]byte(good), &doc); err != nil {
		t.Fatal(err)
	}
	for name := range doc {
		var rest map[string]any
		json.Unmarshal([]byte(good), &rest)
		delete(rest, name)
		short, _ := json.Marshal(rest)
		if schematest.Validate("assessment", short) == nil {
			t.Errorf("a document without %q passes", name)
		}
	}
}

func TestJSONRefusesNaN(t *testing.T) {
	if err := report.JSON(io.Discard, map[string]float64{"x": math.NaN()}); err == nil {
		t.Error("NaN is encoded")
	}
}
