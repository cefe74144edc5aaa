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
// the findings with their cures, the data, and what to do next. figures names
// the pictures that were written.
func WriteAssessment(w io.Writer, a *diagnostics.Assessment, figures []string, t Text) error {
	p := t.newPage()
	p.verdict(a)
	p.publish(a)
	p.test(a)
	p.ranking(a)
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
	facts = append(facts, "recommended curve: "+or(a.Verdict.RecommendedCurve, "none of the candidates fits"))
	p.section("verdict", append(lines, Wrap(strings.Join(facts, " · "), p.body())...)...)
}

func (p *page) publish(a *diagnostics.Assessment) {
	const longest = 26 // of a value in a column; what is longer has its note below
	symbols, values := 0, 0
	for _, l := range a.Publish.Lines {
		symbols = max(symbols, utf8.RuneCountInString(l.Symbol))
		if n := utf8.RuneCountInString(l.Text); n <= longest {
			values = max(values, n)
		}
	}
	var lines []string
	for _, l := range a.Publish.Lines {
		value := strings.ReplaceAll(or(l.Text, unknown), " K/T", "\u00a0K/T")
		head := pad(l.Symbol, symbols+2) + pad(value, values+2)
		switch {
		case l.Note == "":
			lines = append(lines, hang(pad(l.Symbol, symbols+2), symbols+2, value, p.body())...)
		case utf8.RuneCountInString(value) > longest:
			lines = append(lines, hang(pad(l.Symbol, symbols+2), symbols+2, value, p.body())...)
			lines = append(lines, hang("", symbols+4, l.Note, p.body())...)
		default:
			lines = append(lines, hang(head, symbols+values+4, l.Note, p.body())...)
		}
	}
	p.section("publish", append(lines, wrapAll(a.Publish.Notes, p.body())...)...)
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
	if c.EChange.Value.Known() {
		rows = append(rows,
			[]string{fmt.Sprintf("change of E, %s to %s K", kelvin(a.Dataset.TMin), kelvin(a.Dataset.TMax)),
				fmt.Sprintf("%s%s %s: %s)", signed(change.Value, d), energy, sure, interval(change, d))},
			[]string{"too small to matter below", significant(c.ToleranceKJ*diagnostics.Real(e.PerKJ), 2) + energy},
			[]string{"exponent n of T", fmt.Sprintf("%s %s: %s)", signed(c.Exponent.Value, nd), sure, interval(c.Exponent, nd))},
			[]string{"p for n = 0", probability(c.PValue)},
			[]string{fmt.Sprintf("p for n in %g..%g", band[0], band[1]), probability(c.PBand)})
		if c.PScaleFree.Known() {
			rows = append(rows, []string{"p without u(k) as stated", probability(c.PScaleFree)})
		}
	}
	if detectable.Value.Known() {
		dd := decimalsOf(detectable)
		text := plain(detectable.Value, dd) + energy
		if detectable.Lower.Known() || detectable.Upper.Known() {
			text += fmt.Sprintf(" (%s to %s)", plain(detectable.Lower, dd), plain(detectable.Upper, dd))
		}
		rows = append(rows, []string{"seen with 80 % power", text})
	}
	if pw := c.Pointwise; pw != nil {
		rows = append(rows, []string{"the same on single points", fmt.Sprintf("n = %s, p = %s", signed(pw.Exponent.Value, nd), probability(pw.PValue))})
	}
	if s := c.SecondBarrier; s != nil {
		text := fmt.Sprintf("p = %s", probability(s.PValue))
		if s.PValue < 0.05 && s.Crossover[0].Known() {
			text += fmt.Sprintf(", crossover between %s and %s\u00a0K", plain(s.Crossover[0], 0), plain(s.Crossover[1], 0))
		}
		rows = append(rows, []string{"second barrier, E rising", text})
	}
	if b := a.Bootstrap; b != nil {
		for _, iv := range b.Intervals {
			if iv.Parameter == "change_of_E" {
				r := diagnostics.Estimate{Lower: iv.Lower, Upper: iv.Upper}.Times(e.PerKJ)
				rows = append(rows, []string{"change of E by " + iv.Method, interval(r, d) + energy})
			}
		}
	}
	if b := a.Bootstrap; b != nil && len(b.RepeatShare) > 0 {
		var shares []string
		states := slices.Clone(diagnostics.States)
		slices.SortStableFunc(states, func(x, y diagnostics.State) int { return cmp.Compare(b.RepeatShare[y], b.RepeatShare[x]) })
		for _, s := range states {
			if share, ok := b.RepeatShare[s]; ok && share > 0 {
				shares = append(shares, string(s)+"\u00a0"+strings.ReplaceAll(percent(share), " ", "\u00a0"))
			}
		}
		text := strings.Join(shares, ", ")
		if b.Failed > 0 {
			text += fmt.Sprintf(" (%d of %d resamples failed)", b.Failed, b.Resamples)
		}
		rows = append(rows, []string{"a repeat would say", text})
	}
	p.section("test", p.fit(rows)...)
}

func (p *page) ranking(a *diagnostics.Assessment) {
	criterion := map[string]string{"aicc": "AICc", "aic": "AIC", "bic": "BIC"}[a.Settings.Criterion]
	rows := [][]string{{"curve", "p", criterion, "Δ", "family", "weight", "repeats", "fits"}}
	for _, r := range a.Ranking {
		if r.Status == "excluded" {
			continue
		}
		x := map[string]diagnostics.Real{"aicc": r.AICc, "aic": r.AIC, "bic": r.BIC}[a.Settings.Criterion]
		fits := unknown
		if r.Adequate != nil {
			fits = map[bool]string{true: "yes", false: "no"}[*r.Adequate]
		}
		rows = append(rows, []string{r.Curve, fmt.Sprint(r.Params), plain(x, 2), plain(r.Delta, 2),
			percent(r.FamWeight), percent(r.Weight), percent(r.RepeatShare), fits})
	}
	set := table(rows, 1, 2, 3, 4, 5, 6)
	lines := []string{p.dim(set[0])}
	i := 0
	for _, r := range a.Ranking {
		if r.Status == "excluded" {
			lines = append(lines, Wrap(r.Curve+" is excluded: "+or(r.Reason, "no reason given"), p.body())...)
			continue
		}
		i++
		lines = append(lines, set[i])
		if r.Reason != "" {
			lines = append(lines, hang("", 2, r.Reason, p.body())...)
		}
		for _, f := range r.Forms {
			if f.Withheld != "" && strings.Contains(r.Reason, f.Withheld) {
				continue // said already
			}
			lines = append(lines, hang("  ·", 4, form(f, diagnostics.UnitOfEnergy(a.Settings.EnergyUnit)), p.body())...)
		}
	}
	legend := "family, weight: evidence for the curve's family and for the curve, in shares; repeats: how often a repeat of the experiment would put the family first; fits: adequacy at 1 %"
	for _, l := range Wrap(legend, p.body()) {
		lines = append(lines, p.dim(l))
	}
	p.section("ranking", lines...)
}

// form writes one reading of a curve in a line.
func form(f diagnostics.FormEstimate, energy diagnostics.EnergyUnit) string {
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
		s := name + "\u00a0" + brackets(value)
		if u != "" {
			s += "\u00a0" + strings.ReplaceAll(u, " ", "\u00a0")
		}
		parts = append(parts, s)
	}
	s := f.Model + " " + strings.Join(parts, ", ")
	if f.TRef.Known() && slices.ContainsFunc(f.Parameters, func(q diagnostics.ParameterEstimate) bool { return q.Symbol == "n" || q.Symbol == "dCp" }) {
		s += fmt.Sprintf(" at\u00a0%s\u00a0K", kelvin(f.TRef))
	}
	return s
}

func (p *page) findings(a *diagnostics.Assessment) {
	weight := map[diagnostics.Severity]int{diagnostics.Alarm: 0, diagnostics.Warning: 1, diagnostics.Info: 2}
	fs := slices.Clone(a.Findings)
	slices.SortStableFunc(fs, func(x, y diagnostics.Finding) int { return cmp.Compare(weight[x.Severity], weight[y.Severity]) })
	var lines []string
	for _, f := range fs {
		label, styled := f.Code, f.Code
		if f.Severity != diagnostics.Info {
			label = strings.ToUpper(string(f.Severity)) + "\u00a0" + f.Code
			styled = p.amber(label)
		}
		lines = append(lines, p.note(styled, label, f.Message, f.Cure, f.Rows)...)
	}
	p.section("findings", lines...)
}

func (p *page) data(a *diagnostics.Assessment) {
	d := a.Dataset
	facts := fmt.Sprintf("%s: %s, %d used, at %s from %s to %s\u00a0K; %s", strings.Join(d.Files, ", "),
		count(d.Points, "point"), d.Used, count(d.Temperatures, "temperature"), kelvin(d.TMin), kelvin(d.TMax), d.Quantity.Symbol)
	if d.Quantity.Unit != "" {
		facts += " in " + d.Quantity.Unit
	}
	lines := Wrap(facts, p.body())
	lines = append(lines, Wrap(fmt.Sprintf("error model %s: %s", a.Settings.ErrorModel, a.Settings.ErrorModelWhy), p.body())...)
	for _, s := range a.Settings.Assumed {
		lines = append(lines, Wrap("assumed: "+s, p.body())...)
	}
	for _, s := range a.Settings.Selection {
		lines = append(lines, Wrap("selection: "+s, p.body())...)
	}
	for _, r := range a.Data {
		if !r.Used {
			lines = append(lines, hang(fmt.Sprintf("line %d left out:", r.Row), 18, or(r.WhyNot, "no reason given"), p.body())...)
		}
	}
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
	rows = append(rows, []string{"every number:", "the same with --json"})
	p.section("next", table(rows)...)
}
