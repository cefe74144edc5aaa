package report

import (
	"cmp"
	"fmt"
	"io"
	"slices"
	"strings"
	"unicode/utf8"

	"onebarrier/diagnostics"
)

// WriteAssessment prints an assessment so that it is read in half a minute: the
// verdict first, then what to publish, what the verdict rests on, the ranking,
// the findings, the data, and what to do next. Readings of curves that are neither
// published nor rivals, and findings from which nothing follows, are left to the
// document. figures names
// the pictures that were written.
func WriteAssessment(w io.Writer, a *diagnostics.Assessment, figures []string, t Text) error {
	p := t.newPage()
	p.verdict(a)
	p.publish(a)
	p.test(a)
	p.sources(a)
	p.ranking(a)
	if t.LocalEnergies {
		p.localEnergies(a)
	}
	if t.Influence {
		p.influence(a)
		p.temperatureErrors(a)
	}
	p.findings(a)
	p.data(a)
	p.section("figures", figures...)
	p.next(a, figures)
	return p.writeTo(w)
}

func (p *page) verdict(a *diagnostics.Assessment) {
	// The first sentence is the answer, the others say what it rests on.
	lines := Wrap(a.Verdict.Sentence, p.body())
	for i, l := range lines {
		head, rest, ends := strings.Cut(l, ". ")
		if ends || strings.HasSuffix(l, ".") {
			if ends {
				lines[i] = p.bold(head+".") + " " + rest
			} else {
				lines[i] = p.bold(l)
			}
			break
		}
		lines[i] = p.bold(l)
	}
	facts := []string{"verdict " + string(a.Verdict.State)}
	switch a.Verdict.ETrend {
	case "rises", "falls":
		facts = append(facts, "E "+a.Verdict.ETrend+" with T")
	}
	if a.Verdict.State != diagnostics.Untestable {
		m := "whether it matters is open"
		if a.Verdict.Material != nil {
			m = map[bool]string{true: "large enough to matter", false: "too small to matter"}[*a.Verdict.Material]
		}
		facts = append(facts, m)
	}
	facts = append(facts, "recommended: "+or(a.Verdict.RecommendedCurve, "none of the candidates"))
	p.section("verdict", append(lines, Wrap(strings.Join(facts, " · "), p.body())...)...)
}

func (p *page) publish(a *diagnostics.Assessment) {
	const longest = 26 // of a value in a column; what is longer has its note below
	var rows []diagnostics.PublishLine
	symbols, values := 0, 0
	for _, l := range a.Publish.Lines {
		l.Text = strings.ReplaceAll(or(l.Text, unknown), " K/T", "\u00a0K/T")
		l.Note = strings.ReplaceAll(l.Note, "U = ", "U\u00a0=\u00a0")
		if l.Unit != "" {
			l.Note = strings.ReplaceAll(l.Note, " "+l.Unit, "\u00a0"+strings.ReplaceAll(l.Unit, " ", "\u00a0"))
		}
		if strings.HasPrefix(l.Symbol, "lg(") && len(rows) > 0 { // lg A beside A
			of := &rows[len(rows)-1]
			if of.Note != "" {
				of.Note += "; "
			}
			// The number and its unit each stay in one piece; both together may be too wide.
			of.Note += strings.ReplaceAll(l.Symbol, " ", "\u00a0") + " =\u00a0" + strings.ReplaceAll(l.Text, " ", "\u00a0")
			continue
		}
		rows = append(rows, l)
	}
	for _, l := range rows {
		symbols = max(symbols, utf8.RuneCountInString(l.Symbol)+2)
		if n := utf8.RuneCountInString(l.Text); n <= longest {
			values = max(values, n+2)
		}
	}
	var lines []string
	for _, l := range rows {
		symbol, value := pad(l.Symbol, symbols), l.Text
		switch n := utf8.RuneCountInString(value); {
		case l.Note == "":
			lines = append(lines, hang(symbol, symbols, value, p.body())...)
		case n <= longest:
			lines = append(lines, hang(symbol+pad(value, values), symbols+values, l.Note, p.body())...)
		case symbols+n+2+utf8.RuneCountInString(l.Note) <= p.body():
			lines = append(lines, symbol+value+"  "+l.Note)
		default:
			lines = append(lines, hang(symbol, symbols, value, p.body())...)
			lines = append(lines, hang("", symbols+2, l.Note, p.body())...)
		}
	}
	p.section("publish", append(lines, Wrap(strings.Join(a.Publish.Notes, " · "), p.body())...)...)
}

// fit sets rows as a table and wraps the last column where the page is too narrow.
func (p *page) fit(rows [][]string) []string {
	var lines []string
	heads := make([][]string, len(rows))
	for i, r := range rows {
		heads[i] = r[:len(r)-1]
	}
	set := table(heads)
	indent := 0
	for _, s := range set {
		indent = max(indent, len([]rune(s))+2)
	}
	for i, r := range rows {
		last := r[len(r)-1]
		if last == "" {
			lines = append(lines, set[i])
			continue
		}
		lines = append(lines, hang(set[i], indent, last, p.body())...)
	}
	return lines
}

// testCurve is the curve of the exponent test.
const testCurve = "power-prefactor"

func (p *page) test(a *diagnostics.Assessment) {
	c := a.Curvature
	e := diagnostics.UnitOfEnergy(a.Settings.EnergyUnit)
	change, detectable := c.EChange.Times(e.PerKJ), c.Detectable.Times(e.PerKJ)
	energy := "\u00a0" + e.Name
	d := decimalsOf(change)
	nd := decimalsOf(c.Exponent)
	sure := fmt.Sprintf("(%s", percent(diagnostics.Real(a.Settings.Confidence)))
	band := a.Settings.PrefactorBand
	var rows [][]string
	byTest := "" // names the curve of the test where another tells the change of E
	if c.EChange.Value.Known() {
		size := func(e diagnostics.Estimate) string {
			d := decimalsOf(e)
			return fmt.Sprintf("%s%s %s: %s)", signed(e.Value, d), energy, sure, interval(e, d))
		}
		told, label := a.Verdict.EChangeCurve, "change of E over the range"
		if told != "" && told != testCurve {
			rows = append(rows, []string{"change of E by " + told, size(a.Verdict.EChange.Times(e.PerKJ))})
			label, byTest = "by the curve of the test", " ("+testCurve+")"
		}
		rows = append(rows,
			[]string{label, size(change)},
			[]string{"too small to matter below", significant(c.ToleranceKJ*diagnostics.Real(e.PerKJ), 2) + energy},
			[]string{"exponent n of T", fmt.Sprintf("%s %s: %s)", signed(c.Exponent.Value, nd), sure, interval(c.Exponent, nd))},
			[]string{fmt.Sprintf("p for n = 0; for n in %g..%g", band[0], band[1]), probability(c.PValue) + "; " + probability(c.PBand)})
		if c.PScaleFree.Known() {
			rows = append(rows, []string{"p by the scatter alone", probability(c.PScaleFree)})
		}
		rows = append(rows, leavingOut(a)...)
	}
	if text := detected(detectable); text != "" {
		rows = append(rows, []string{"seen with 80 % power", text + energy})
	}
	if pw := c.Pointwise; pw != nil {
		change := pw.EChange.Times(e.PerKJ)
		rows = append(rows, []string{"the same on single points", fmt.Sprintf("n = %s, %s; change of E %s%s %s: %s)",
			signed(pw.Exponent.Value, nd), pIs(pw.PValue, false), signed(change.Value, d), energy, sure, interval(change, d))})
	}
	if c.EChange.Value.Known() {
		rows = append(rows, runs(a)...)
	}
	if text := diagnostics.ThermometerText(a.TemperatureError, a.Verdict.State.Lost(c.Exponent.Value, a.Settings.PrefactorBand)); text != "" && a.Verdict.State.Curved() {
		rows = append(rows, []string{"if the thermometer reads", strings.ReplaceAll(text, " K", "\u00a0K")})
	}
	if s := c.SecondBarrier; s != nil {
		text := pIs(s.PValue, s.AtFloor())
		if where := s.CrossoverText(float64(a.Dataset.TMin), float64(a.Dataset.TMax)); s.PValue < 0.05 && where != "" {
			text += ", crossover " + strings.ReplaceAll(where, " K", "\u00a0K")
		}
		if a.Dataset.Limits > 0 {
			text += " (without the limits)"
		}
		rows = append(rows, []string{"second barrier, E rising", text},
			[]string{"false alarm, straight data", falseAlarms(a.Dataset.Temperatures)})
	}
	if b := a.Bootstrap; b != nil {
		for _, iv := range b.Intervals {
			if iv.Parameter == "change_of_E" {
				r := diagnostics.Estimate{Lower: iv.Lower, Upper: iv.Upper}.Times(e.PerKJ)
				text := unknown
				if r.Lower.Known() || r.Upper.Known() {
					text = interval(r, d) + energy
				}
				text += byTest
				if iv.Note != "" {
					text += " (" + iv.Note + ")"
				}
				rows = append(rows, []string{"change of E by " + iv.Method, text})
			}
		}
	}
	// Where every candidate is rejected, resamples come from curves known to be wrong.
	if b := a.Bootstrap; b != nil && a.Verdict.RecommendedCurve != "" {
		var shares []string
		states := slices.Clone(diagnostics.States)
		slices.SortStableFunc(states, func(x, y diagnostics.State) int { return cmp.Compare(b.RepeatShare[y], b.RepeatShare[x]) })
		for _, s := range states {
			if share, ok := b.RepeatShare[s]; ok && share > 0 {
				shares = append(shares, string(s)+"\u00a0"+strings.ReplaceAll(percent(share), " ", "\u00a0"))
			}
		}
		text := or(strings.Join(shares, ", "), unknown)
		if b.Failed > 0 {
			text += fmt.Sprintf(" (%d of %d resamples failed)", b.Failed, b.Resamples)
		}
		rows = append(rows, []string{"a repeat would say", text})
	}
	p.section("test", p.fit(rows)...)
}

// falseAlarms is how often one of the two tests finds something in straight data
// (METHODS; simulated).
func falseAlarms(temperatures int) string {
	if temperatures <= 4 {
		return "9 % (verdict or second barrier)"
	}
	return "7–8 % (verdict or second barrier)"
}

// detected writes the smallest change that would be seen, or its interval alone
// where σ is too badly known for more.
func detected(e diagnostics.Estimate) string {
	d := decimalsOf(e)
	switch bounds := e.Lower.Known() && e.Upper.Known(); {
	case !e.Value.Known() && bounds:
		return plain(e.Lower, d) + " to " + plain(e.Upper, d)
	case !e.Value.Known():
		return ""
	case bounds && e.Lower < e.Upper:
		return fmt.Sprintf("%s (%s to %s)", plain(e.Value, d), plain(e.Lower, d), plain(e.Upper, d))
	}
	return plain(e.Value, d)
}

// runs is the row of the runs test of the recommended curve, beside the number of
// residuals: limits have none.
func runs(a *diagnostics.Assessment) [][]string {
	for _, r := range a.Ranking {
		for _, t := range r.Adequacy {
			if r.Curve == a.Verdict.RecommendedCurve && t.Test == diagnostics.TestRuns {
				return [][]string{{"runs of residuals", fmt.Sprintf("%s of %d, %s (%s)", plain(t.Statistic, 0), r.Points-a.Dataset.Limits, pIs(t.PValue, t.AtFloor()), r.Curve)}}
			}
		}
	}
	return nil
}

// ranking prints a line for each curve, and the reading of those that a reader may
// want beside the published one: its rivals in the 95 % set, and the straight line,
// unless they fail their adequacy test.
func (p *page) ranking(a *diagnostics.Assessment) {
	const marked, other = "•\u00a0", "\u00a0\u00a0"
	criterion := map[string]string{"aicc": "AICc", "aic": "AIC", "bic": "BIC"}[a.Settings.Criterion]
	rows := [][]string{{other + "curve", "p", criterion, "Δ", "family", "weight", "repeats", "fits"}}
	standIn := criterion == "AICc" && slices.ContainsFunc(a.Ranking, func(r diagnostics.Ranked) bool { return !r.AICc.Known() && r.AIC.Known() })
	inSet, repeats, intervals, saturated := false, false, false, false
	for _, r := range a.Ranking {
		if r.Status == "excluded" {
			continue
		}
		value := plain(map[string]diagnostics.Real{"aicc": r.AICc, "aic": r.AIC, "bic": r.BIC}[a.Settings.Criterion], 2)
		switch {
		case standIn && !r.AICc.Known() && r.AIC.Known():
			value = plain(r.AIC, 2) + "†"
		case standIn:
			value += "\u00a0" // digits stay beneath digits
		}
		fits := unknown
		if r.Adequate != nil {
			fits = map[bool]string{true: "yes", false: "no"}[*r.Adequate]
		}
		mark := other
		if r.InSet {
			mark, inSet = marked, true
		}
		repeats = repeats || r.RepeatShare.Known()
		saturated = saturated || !r.AIC.Known()
		rows = append(rows, []string{mark + r.Curve, fmt.Sprint(r.Params), value, plain(r.Delta, 2),
			percent(r.FamWeight), percent(r.Weight), percent(r.RepeatShare), fits})
	}
	set := table(rows, 1, 2, 3, 4, 5, 6)
	if utf8.RuneCountInString(set[0]) > p.body() { // beside a long name
		set = spaced(1, rows, 1, 2, 3, 4, 5, 6)
	}
	lines := []string{p.dim(set[0])}
	i := 0
	for _, r := range a.Ranking {
		if r.Status == "excluded" {
			lines = append(lines, hang("", 2, r.Curve+" is excluded: "+or(r.Reason, "no reason given"), p.body())...)
			continue
		}
		i++
		lines = append(lines, set[i])
		reason := r.Reason
		if standIn && strings.HasPrefix(reason, "AICc undefined") {
			_, reason, _ = strings.Cut(reason, "; ") // the legend says so
		}
		if reason != "" {
			lines = append(lines, hang("", 4, reason, p.body())...)
		}
		rejected := r.Adequate != nil && !*r.Adequate
		rival := r.InSet && r.Weight >= 0.01 || r.Curve == "straight"
		if r.Curve == a.Publish.Curve || rejected || !rival || len(r.Forms) == 0 {
			continue
		}
		if f := r.Forms[0]; f.Withheld == "" || !strings.Contains(r.Reason, f.Withheld) {
			reading := form(f, a.RoundingOf(r.Curve), diagnostics.UnitOfEnergy(a.Settings.EnergyUnit))
			intervals = intervals || strings.Contains(reading, "\u00a0to\u00a0")
			lines = append(lines, hang("  ·", 4, reading, p.body())...)
		}
	}
	var legend []string
	if inSet {
		legend = append(legend, "•: the 95 % set")
	}
	if standIn {
		needs := 3
		if b := a.BetweenSources; b != nil && !b.Confounded {
			needs += offsetsIn(b)
		}
		legend = append(legend, fmt.Sprintf("†: AIC, AICc undefined: needs N ≥ p + %d", needs))
	}
	if saturated {
		legend = append(legend, "–: passes through every point, no likelihood")
	}
	if inSet {
		legend = append(legend, "family, weight: share of the evidence")
	}
	if repeats {
		legend = append(legend, "repeats: share of repeats that put the family first")
	}
	legend = append(legend, "fits: adequate at 1 %")
	if intervals {
		legend = append(legend, "(a to b): "+percent(diagnostics.Real(a.Settings.Confidence))+" interval")
	}
	for _, l := range Wrap(strings.Join(legend, "; "), p.body()) {
		lines = append(lines, p.dim(l))
	}
	p.section("ranking", lines...)
}

// form writes one reading of a curve in a line.
func form(f diagnostics.FormEstimate, rounding diagnostics.Rounding, energy diagnostics.EnergyUnit) string {
	if f.Withheld != "" {
		return f.Model + " – " + f.Withheld
	}
	var parts []string
	for _, q := range f.Parameters {
		name, value, u := symbol(q.Symbol), q.Estimate, unit(q.Unit)
		switch q.Unit {
		case "kJ mol^-1":
			name, value, u = name+energy.Per, value.Times(energy.PerKJ), energy.Name
		case "J mol^-1 K^-1":
			name, value, u = name+energy.Per, value.Times(energy.EntropyPerJ), energy.Entropy
		}
		if a, isLog := strings.CutPrefix(q.Symbol, "ln_"); isLog {
			if over := diagnostics.OverUnit(q.Unit); over != "" {
				name = "ln(" + a + over + ")"
			}
			u = ""
		}
		s := strings.ReplaceAll(name+" "+rounding.Text(value, u), " ", string(nbsp))
		if open := f.OpenBarriers(); q.Symbol == "T_x" && open != "" {
			s += strings.ReplaceAll(" ("+open+" open)", " ", string(nbsp))
		}
		parts = append(parts, s)
	}
	s := f.Model + " " + strings.Join(parts, ", ")
	if f.TRef.Known() && slices.ContainsFunc(f.Parameters, func(q diagnostics.ParameterEstimate) bool { return q.Symbol == "n" || q.Symbol == "dCp" }) {
		s += fmt.Sprintf(" at\u00a0%s\u00a0K", kelvin(f.TRef))
	}
	return s
}

// said lists the findings that another section says already, or that nothing
// follows from for the reader of a text. They stand in the JSON.
var said = map[string]bool{
	"aicc-undefined": true, "curve-excluded": true, "curve-not-fitted": true, "curve-not-identified": true, // ranking
	"forms-same-curve": true, "ranking-and-test": true, // nothing follows
	"conditional-on-choice": true, // notes of publish
	"sources-compared":      true, // sources
}

// findings prints alarms and warnings in full, with their cures, and one message
// for each of the rest: explain has the whole story.
func (p *page) findings(a *diagnostics.Assessment) {
	weight := map[diagnostics.Severity]int{diagnostics.Alarm: 0, diagnostics.Warning: 1, diagnostics.Info: 2}
	fs := slices.Clone(a.Findings)
	slices.SortStableFunc(fs, func(x, y diagnostics.Finding) int { return cmp.Compare(weight[x.Severity], weight[y.Severity]) })
	var lines []string
	for _, f := range fs {
		if f.Severity == diagnostics.Info {
			if !said[f.Code] {
				lines = append(lines, p.note(p.dim(f.Code), f.Code, f.Message, "", f.Rows)...)
			}
			continue
		}
		label := strings.ToUpper(string(f.Severity)) + "\u00a0" + f.Code
		lines = append(lines, p.note(p.amber(label), label, f.Message, f.Cure, f.Rows)...)
	}
	p.section("findings", lines...)
}

func (p *page) data(a *diagnostics.Assessment) {
	d := a.Dataset
	used := "all used"
	if d.Used != d.Points {
		used = fmt.Sprintf("%d used", d.Used)
	}
	at := "at"
	if d.Limits > 0 {
		at = fmt.Sprintf("%d of them as limits, the others at", d.Limits)
	}
	facts := fmt.Sprintf("%s: %s, %s, %s %s from %s to %s\u00a0K; %s", strings.Join(d.Files, ", "),
		count(d.Points, "point"), used, at, count(d.Temperatures, "temperature"), kelvin(d.TMin), kelvin(d.TMax), d.Quantity.Symbol)
	if d.Quantity.Unit != "" {
		facts += " in " + d.Quantity.Unit
	}
	lines := Wrap(facts, p.body())
	lines = append(lines, Wrap(fmt.Sprintf("error model %s: %s", a.Settings.ErrorModel, a.Settings.ErrorModelWhy), p.body())...)
	if text := diagnostics.GrantedText(a.TemperatureError, a.Settings.ThermometerError); text != "" {
		lines = append(lines, Wrap(text, p.body())...)
	}
	for _, s := range a.Settings.Assumed {
		lines = append(lines, Wrap("assumed: "+s, p.body())...)
	}
	for _, s := range a.Settings.Selection {
		lines = append(lines, Wrap("selection: "+s, p.body())...)
	}
	var left []leftRow
	for _, r := range a.Data {
		if !r.Used {
			left = append(left, leftRow{r.File, r.Row, or(r.WhyNot, "no reason given")})
		}
	}
	places := leftOut(left, d.Files)
	for i := range places {
		places[i][0] += " left out:"
	}
	lines = append(lines, labelled(places, p.body())...)
	p.section("data", lines...)
}

func (p *page) next(a *diagnostics.Assessment, figures []string) {
	rows := [][]string{{"the verdict in full:", "onebarrier explain " + string(a.Verdict.State)}}
	for _, f := range a.Findings {
		if f.Severity == diagnostics.Alarm {
			rows = append(rows, []string{"an alarm in full:", "onebarrier explain " + f.Code})
			break
		}
	}
	if len(figures) == 0 {
		rows = append(rows, []string{"pictures:", "the same with --figures FOLDER"})
	}
	rows = append(rows, []string{"all forms and numbers:", "the same with --json"})
	p.section("next", table(rows)...)
}
