package survey

import (
	"bufio"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"maps"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
)

// CompensationSchema names what a line of --compensation --format jsonl is.
const CompensationSchema = "onebarrier.compensation/1"

// leastSets is the number of data sets below which a correlation says nothing.
const leastSets = 5

// kiloR is R in kJ mol⁻¹ K⁻¹.
const kiloR = models.GasConstant / 1000

// line is the straight line of one data set: E in kJ/mol with its standard
// uncertainty, ln A in units of its group, and x = 1/(RT_hm) in mol/kJ at its own
// harmonic mean temperature, where its errors of E and of ln k are not correlated.
type line struct {
	e, u, lnA, x float64
	tMin, tMax   float64 // K
	row          *Row    // names the data set; nil in computations alone
}

// doubtful are the warnings that make T or k itself doubtful: one data set read in a
// wrong unit can turn a correlation over hundreds.
var doubtful = []string{"celsius-like-kelvin", "kelvin-like-celsius", "kelvin-gap", "superscript-lost"}

// Compensation says, for the data sets of one rate unit, whether ln A goes with E, and
// how much of it is arithmetic. Unknown numbers are NaN.
//
// The estimates of ln A and E of one set come from one line, so that their errors are
// correlated: cov(ln A, E) = u²(E)/(R T_hm). The plot of ln A against E is therefore
// nearly straight whatever the chemistry, with a slope near 1/(R T_hm). At T_hm, the
// harmonic mean temperature, the errors of ln k and E are not correlated, and what is
// found there is no arithmetic (R. R. Krug, W. G. Hunter and R. A. Grieger, J. Phys.
// Chem. 80 (1976) 2335, 2341).
type Compensation struct {
	Unit string // of k, the most frequent of this dimension; "" where none was understood
	Sets int
	T    float64 // T_hm over all sets in K: 1/T is the mean of theirs
	// Outside counts the sets whose measured range does not hold T: k(T) is
	// extrapolated there. OutsideSets are the first of them, those furthest from T.
	Outside     int
	OutsideSets []*Row
	Curved      int // sets with a verdict of curvature: their line is a mean
	// Doubtful counts the sets that were left out since warnings make T or k doubtful,
	// Doubts are these warnings.
	Doubtful int
	Doubts   []string
	// Decisive is the set without which P changes most, PWithout what it is then; nil
	// where leastSets would not be left.
	Decisive *Row
	PWithout float64

	LnA Correlation // of ln A with E: mostly arithmetic
	LnK Correlation // of ln k(T_hm) with E
	// TIso is the isokinetic temperature in K, at which all lines would cross if they
	// did: 1/(R slope of ln A). Where errors alone make the slope it is near T.
	TIso float64
	// Expected is the correlation of ln k(T) with E that errors alone leave where the
	// sets have other harmonic means than T.
	Expected float64
	// P is of no correlation beyond Expected: Student's t of the products
	// (E − Ē)(ln k − mean) less their expected errors, n − 1 degrees of freedom. It
	// holds where some sets are much better known than others; a test of the
	// correlation coefficient then rejects several times too often.
	P float64
	// ErrorShare is the part of the variance of E over the sets that is u²(E).
	ErrorShare float64
	// HomogeneityP is of one E in all sets (W. G. Cochran, Biometrics 10 (1954) 101).
	HomogeneityP float64
}

// Correlation of a quantity with E over the sets: Pearson's r and the slope in mol/kJ.
type Correlation struct {
	R, Slope float64
}

// found reports whether ln A goes with E beyond arithmetic.
func (c *Compensation) found() bool { return c.P < 0.05 }

// compensation judges lines of one rate unit. It needs leastSets of them.
func compensation(unit string, lines []line) Compensation {
	n := float64(len(lines))
	c := Compensation{Unit: unit, Sets: len(lines)}
	var x0, meanE, meanLnA, meanU2 float64
	var w, we float64 // for Cochran's Q
	for _, l := range lines {
		x0, meanE, meanLnA, meanU2 = x0+l.x/n, meanE+l.e/n, meanLnA+l.lnA/n, meanU2+l.u*l.u/n
		w, we = w+1/(l.u*l.u), we+l.e/(l.u*l.u)
	}
	c.T = 1 / (kiloR * x0)
	meanLnK := meanLnA - meanE*x0
	var see, sea, saa, sek, skk, expected, q float64
	products := make([]float64, len(lines))
	var meanProduct float64
	for i, l := range lines {
		de, da, dk := l.e-meanE, l.lnA-meanLnA, l.lnA-l.e*x0-meanLnK
		see, sea, saa = see+de*de, sea+de*da, saa+da*da
		sek, skk = sek+de*dk, skk+dk*dk
		// ln k(T) = ln k(T_hm,i) + E (x_i − x0), of which the errors of the first term
		// and of E are not correlated.
		artefact := l.u * l.u * (l.x - x0)
		expected += artefact
		products[i] = de*dk - artefact
		meanProduct += products[i] / n
		q += (l.e - we/w) * (l.e - we/w) / (l.u * l.u)
		if c.T < l.tMin || c.T > l.tMax {
			c.Outside++
		}
	}
	var ss float64
	for _, p := range products {
		ss += (p - meanProduct) * (p - meanProduct)
	}
	c.LnA = Correlation{sea / math.Sqrt(see*saa), sea / see}
	c.LnK = Correlation{sek / math.Sqrt(see*skk), sek / see}
	c.TIso = see / (kiloR * sea)
	c.Expected = math.Max(-1, math.Min(1, expected/math.Sqrt(see*skk)))
	t := meanProduct / math.Sqrt(ss/(n-1)/n)
	c.P = 2 * distuv.StudentsT{Sigma: 1, Nu: n - 1}.Survival(math.Abs(t))
	c.ErrorShare = meanU2 / (see / (n - 1))
	c.HomogeneityP = distuv.ChiSquared{K: n - 1}.Survival(q)
	return c
}

// mostNamed data sets are named, mostTried are left out by turns.
const (
	mostNamed = 3
	mostTried = 8
)

// judge is compensation, with what single data sets do to it.
func judge(unit string, lines []line) Compensation {
	c := compensation(unit, lines)
	for _, l := range lines {
		switch diagnostics.State(l.row.State) {
		case diagnostics.BeyondPrefactor, diagnostics.WithinPrefactor, diagnostics.CurvedOpen:
			c.Curved++
		}
	}
	// Distance in 1/T: how far k is extrapolated.
	beyond := func(l line) float64 { return math.Max(1/c.T-1/l.tMin, 1/l.tMax-1/c.T) }
	far := slices.Clone(lines)
	slices.SortStableFunc(far, func(a, b line) int { return cmp.Compare(beyond(b), beyond(a)) })
	for _, l := range far[:min(len(far), mostNamed, c.Outside)] {
		c.OutsideSets = append(c.OutsideSets, l.row)
	}
	c.PWithout = math.NaN()
	if len(lines) <= leastSets || math.IsNaN(c.P) {
		return c
	}
	// Those whose product of deviations is largest move the sums most.
	var meanE, meanLnK float64
	lnK := func(l line) float64 { return l.lnA - l.e/(kiloR*c.T) }
	for _, l := range lines {
		meanE, meanLnK = meanE+l.e/float64(len(lines)), meanLnK+lnK(l)/float64(len(lines))
	}
	product := func(i int) float64 { return math.Abs((lines[i].e - meanE) * (lnK(lines[i]) - meanLnK)) }
	order := make([]int, len(lines))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(i, j int) int { return cmp.Compare(product(j), product(i)) })
	most := -1.0
	for _, i := range order[:min(len(order), mostTried)] {
		others := compensation(unit, slices.Delete(slices.Clone(lines), i, i+1))
		// By the factor of p; a p of 0 is as far as numbers go.
		change := math.Abs(math.Log(math.Max(others.P, 1e-300)) - math.Log(math.Max(c.P, 1e-300)))
		if change > most {
			most, c.Decisive, c.PWithout = change, lines[i].row, others.P
		}
	}
	return c
}

// Lines left out of a check of compensation, by reason.
type leftOut struct {
	noLine int // data sets without a line whose covariance is known
	few    int // data sets of rate units with fewer than leastSets
	// doubtful counts the data sets left out for their warnings.
	doubtful int
}

// compensations reads the lines of the chosen data sets and judges each rate unit,
// those with most sets first.
func (s *Store) compensations(ctx context.Context, o TableOptions) (all []Compensation, out leftOut, err error) {
	if err := o.Check(); err != nil {
		return nil, out, err
	}
	p, band, err := s.falseDiscoveries(ctx)
	if err != nil {
		return nil, out, err
	}
	type group struct {
		units map[string]int // spellings, and the data sets that have each
		lines []line

		doubtful int
		doubts   map[string]bool
	}
	groups := map[any]*group{}
	// Unordered: the sorter of SQLite would have to move the documents about.
	err = s.query(ctx, true, "", func(e Entry) error {
		r := &e.Row
		if r.Testable() {
			r.QValue, r.QBand = p.of(r.PValue), band.of(r.PBand)
		}
		if r.ErrorCode != "" || !o.chooses(r) {
			return nil
		}
		l, ok := lineOf(e.Assessment)
		if !ok {
			out.noLine++
			return nil
		}
		l.tMin, l.tMax, l.row = r.TMin, r.TMax, r
		var key any = r.RateUnit
		if u, err := dataset.ParseUnit(r.RateUnit); err == nil {
			key = u.Dim
			l.lnA += math.Log(u.Scale) + float64(u.Exp10)*math.Ln10 // A in SI units
		}
		g := groups[key]
		if g == nil {
			g = &group{units: map[string]int{}, doubts: map[string]bool{}}
			groups[key] = g
		}
		if why := r.hasWarning(doubtful); why != "" {
			g.doubtful++
			g.doubts[why] = true
			return nil
		}
		g.units[r.RateUnit]++
		g.lines = append(g.lines, l)
		return nil
	})
	if err != nil {
		return nil, out, err
	}
	for _, g := range groups {
		out.doubtful += g.doubtful
		if len(g.lines) < leastSets {
			out.few += len(g.lines)
			continue
		}
		// The order of the store must not reach the last digit of a sum.
		slices.SortFunc(g.lines, func(a, b line) int {
			return cmp.Or(cmp.Compare(a.e, b.e), cmp.Compare(a.lnA, b.lnA), cmp.Compare(a.x, b.x), cmp.Compare(a.u, b.u), cmp.Compare(a.row.SetID, b.row.SetID))
		})
		units := slices.SortedFunc(maps.Keys(g.units), func(a, b string) int {
			return cmp.Or(cmp.Compare(g.units[b], g.units[a]), cmp.Compare(a, b))
		})
		c := judge(units[0], g.lines)
		c.Doubtful, c.Doubts = g.doubtful, slices.Sorted(maps.Keys(g.doubts))
		all = append(all, c)
	}
	slices.SortFunc(all, func(a, b Compensation) int {
		return cmp.Or(cmp.Compare(b.Sets, a.Sets), cmp.Compare(a.Unit, b.Unit))
	})
	return all, out, nil
}

// lineOf reads the straight line from an assessment: the covariance of ln A and E
// says where their errors part.
func lineOf(document []byte) (l line, ok bool) {
	var a struct {
		Ranking []struct {
			Forms []struct {
				Model      string
				Parameters []struct{ Estimate *float64 }
				Covariance [][]*float64
			}
		}
	}
	if document == nil || json.Unmarshal(document, &a) != nil {
		return l, false
	}
	for _, r := range a.Ranking {
		for _, f := range r.Forms {
			if f.Model != "arrhenius" || len(f.Parameters) != 2 || len(f.Covariance) != 2 || len(f.Covariance[1]) != 2 {
				continue
			}
			lnA, e, cov, u2 := f.Parameters[0].Estimate, f.Parameters[1].Estimate, f.Covariance[1][0], f.Covariance[1][1]
			if lnA == nil || e == nil || cov == nil || u2 == nil || !(*u2 > 0) || !(*cov > 0) {
				continue
			}
			return line{e: *e, u: math.Sqrt(*u2), lnA: *lnA, x: *cov / *u2}, true
		}
	}
	return l, false
}

// WriteCompensation writes, for each rate unit, whether ln A goes with E, as text or
// jsonl, over the data sets that the options choose.
func (s *Store) WriteCompensation(ctx context.Context, w io.Writer, format string, o TableOptions, layout report.Text) error {
	if format != "" && format != "text" && format != "jsonl" {
		return fmt.Errorf("survey: compensation has no form %q; use text or jsonl", format)
	}
	all, out, err := s.compensations(ctx, o)
	if err != nil {
		return err
	}
	standing, err := s.Standing(ctx)
	if err != nil {
		return err
	}
	b := bufio.NewWriter(w)
	if format == "jsonl" {
		encode := json.NewEncoder(b)
		encode.SetEscapeHTML(false)
		for i := range all {
			if err := encode.Encode(all[i].document(standing.Complete())); err != nil {
				return err
			}
		}
		return b.Flush()
	}
	if len(all) > 0 {
		for _, l := range report.Wrap("The estimates of ln A and E of one line always go together: both come from extending it to 1/T = 0. Whether data sets have ln A and E that go together is seen at their harmonic mean temperature T_hm, where the errors of E and ln k are not correlated (Krug, Hunter and Grieger 1976).", layout.Columns()) {
			fmt.Fprintln(b, l)
		}
	}
	for i := range all {
		all[i].writeText(b, layout)
	}
	notes := standing.Sentences()
	for _, c := range all {
		if c.Curved > 0 && len(o.States) == 0 {
			notes = append(notes, "Without a filter curved data sets are used too, with a straight line through each: --state straight-within,unresolved leaves them out.")
			break
		}
	}
	if out.doubtful > 0 {
		notes = append(notes, fmt.Sprintf("Not used: %s with a warning that makes T or k doubtful (%s); correct the headings and survey again to use them.", report.Count(out.doubtful, "data set"), strings.Join(doubtful, ", ")))
	}
	if len(all) == 0 {
		notes = append(notes, fmt.Sprintf("Nothing can be said: no rate unit has %d data sets with a straight line and its covariance.", leastSets))
	}
	if out.few > 0 {
		notes = append(notes, fmt.Sprintf("Not used: %s of rate units with fewer than %d.", report.Count(out.few, "data set"), leastSets))
	}
	if out.noLine > 0 {
		notes = append(notes, fmt.Sprintf("Not used: %s without a straight line or its covariance.", report.Count(out.noLine, "data set")))
	}
	if len(notes) > 0 {
		if len(all) > 0 {
			fmt.Fprintln(b)
		}
		for _, l := range report.Wrap(strings.Join(notes, " "), layout.Columns()) {
			fmt.Fprintln(b, l)
		}
	}
	return b.Flush()
}

func (c *Compensation) writeText(w io.Writer, layout report.Text) {
	unit := c.Unit
	if unit == "" {
		unit = "no unit that is understood"
	}
	fmt.Fprintf(w, "\n%s\n", layout.Bold(fmt.Sprintf("%s, k in %s, T_hm = %s K", report.Count(c.Sets, "data set"), printable(unit), report.Fixed(c.T, 1))))
	row := func(what string, r Correlation, p, isA string) {
		line := strings.Join([]string{"  " + report.Pad(what, 20), report.PadLeft(report.Signed(r.R, 3), 7), report.PadLeft(p, 8), isA}, "  ")
		fmt.Fprintln(w, strings.TrimRight(line, " "))
	}
	fmt.Fprintln(w, layout.Dim("  "+report.Pad("against E", 20)+"  "+report.PadLeft("r", 7)+"  "+report.PadLeft("p", 8)))
	row("ln A", c.LnA, report.Unknown, "artefact: says nothing by itself")
	row("ln k(T_hm)", c.LnK, share(c.P), "the test")
	for _, l := range report.Wrap(strings.Join(c.sentences(), " "), layout.Columns()-2) {
		fmt.Fprintln(w, "  "+l)
	}
}

// sentences say what was found.
func (c *Compensation) sentences() []string {
	var out []string
	say := func(format string, args ...any) { out = append(out, fmt.Sprintf(format, args...)) }
	switch {
	case math.IsNaN(c.P):
		say("It cannot be tested: E or ln k(T_hm) is the same in all data sets.")
	case c.found():
		say("ln k(T_hm) goes with E by more than errors explain.")
		say("Compensation is one cause; that k can only be measured where it is neither too small nor too large is another.")
	default:
		say("No correlation beyond errors is shown at T_hm: that of ln A with E is no evidence of compensation.")
	}
	if c.TIso > 0 && known(c.TIso) {
		say("The slope of ln A against E is that of lines that cross at %s K; arithmetic alone puts this at T_hm.", report.Fixed(c.TIso, 0))
	}
	switch {
	case !(c.HomogeneityP < 0.05):
		say("The data sets do not differ in E by more than their uncertainties (p = %s): there is nothing that ln A could compensate.", share(c.HomogeneityP))
	case c.ErrorShare > 0.1:
		say("Uncertainty makes up %s of the variance of E.", report.Percent(math.Min(1, c.ErrorShare)))
	}
	if math.Abs(c.Expected) > 0.05 {
		say("The temperature ranges differ: errors alone give r = %s at T_hm, and the test allows for it.", report.Signed(c.Expected, 2))
	}
	if c.Outside > 0 {
		say("T_hm lies outside the measured range of %s, where k is extrapolated, furthest for %s: compare data sets of like ranges.", report.Count(c.Outside, "data set"), places(c.OutsideSets))
	}
	if c.Curved > 0 {
		say("Curved by their verdict: %s.", report.Count(c.Curved, "data set"))
	}
	if c.Decisive != nil {
		if turns := c.found() != (c.PWithout < 0.05); turns {
			say("ONE DATA SET DECIDES: without %s p is %s. Check it before anything is concluded.", c.Decisive.place(), share(c.PWithout))
		} else {
			say("No single data set that was tried decides: without that of most influence, %s, p is %s.", c.Decisive.place(), share(c.PWithout))
		}
	}
	return out
}

// places names data sets.
func places(rows []*Row) string {
	var out []string
	for _, r := range rows {
		out = append(out, r.place())
	}
	return strings.Join(out, ", ")
}

// document is the JSON form; unknown numbers are null.
func (c *Compensation) document(complete bool) any {
	null := func(x float64) *float64 {
		if !known(x) {
			return nil
		}
		return &x
	}
	type correlation struct {
		R     *float64 `json:"r"`
		Slope *float64 `json:"slope_mol_per_kj"`
	}
	type set struct {
		ID      string `json:"set_id"`
		Dataset string `json:"dataset"`
		File    string `json:"source_file"`
	}
	outside := []set{}
	for _, r := range c.OutsideSets {
		outside = append(outside, set{r.SetID, r.Dataset, r.SourceFile})
	}
	var decisive *set
	if r := c.Decisive; r != nil {
		decisive = &set{r.SetID, r.Dataset, r.SourceFile}
	}
	of := func(r Correlation) correlation { return correlation{null(r.R), null(r.Slope)} }
	return struct {
		Schema       string      `json:"schema"`
		Unit         string      `json:"rate_unit"`
		Sets         int         `json:"sets"`
		T            *float64    `json:"t_hm_k"`
		Outside      int         `json:"outside"`
		LnA          correlation `json:"ln_a"`
		LnK          correlation `json:"ln_k"`
		TIso         *float64    `json:"t_iso_k"`
		Expected     *float64    `json:"expected_r"`
		P            *float64    `json:"p_value"`
		ErrorShare   *float64    `json:"error_share"`
		HomogeneityP *float64    `json:"homogeneity_p"`
		Found        bool        `json:"beyond_arithmetic"`
		OutsideSets  []set       `json:"outside_sets"`
		Curved       int         `json:"curved"`
		Doubtful     int         `json:"doubtful_left_out"`
		Doubts       []string    `json:"doubts"`
		Decisive     *set        `json:"most_influential"`
		PWithout     *float64    `json:"p_value_without"`
		Complete     bool        `json:"complete"`
	}{CompensationSchema, c.Unit, c.Sets, null(c.T), c.Outside, of(c.LnA), of(c.LnK), null(c.TIso), null(c.Expected), null(c.P), null(c.ErrorShare), null(c.HomogeneityP), c.found(),
		outside, c.Curved, c.Doubtful, append([]string{}, c.Doubts...), decisive, null(c.PWithout), complete}
}
