package report

import (
	"fmt"
	"slices"
	"strings"
	"unicode/utf8"

	"onebarrier/diagnostics"
)

// leavingOut is the row of the test that says what n and p become without one of the
// temperatures and points.
func leavingOut(a *diagnostics.Assessment) [][]string {
	r := a.InfluenceRange
	if r == nil || !r.ExponentLow.Known() {
		return nil
	}
	d := decimalsOf(a.Curvature.Exponent)
	text := fmt.Sprintf("n %s to %s", signed(r.ExponentLow, d), signed(r.ExponentHigh, d))
	if r.PLow.Known() {
		text += fmt.Sprintf(", p %s to %s", probability(r.PLow), probability(r.PHigh))
	}
	if r.NotExamined > 0 {
		text += fmt.Sprintf(" (%d of %d)", r.Examined, r.Examined+r.NotExamined)
	}
	return [][]string{{"without one T or point", strings.NewReplacer(" to ", "\u00a0to\u00a0", "n ", "n\u00a0", "p ", "p\u00a0").Replace(text)}}
}

// influence is the table of the test without each temperature and point.
func (p *page) influence(a *diagnostics.Assessment) {
	if len(a.Influence) == 0 {
		return
	}
	d := decimalsOf(a.Curvature.Exponent)
	rows := [][]string{{"  row", "T/K", "n", "p", "error", "lever.", "Cook", "resid."}}
	deciding := false
	var why []string
	for _, f := range a.Influence {
		mark := "  "
		if f.Deciding {
			mark, deciding = "• ", true
		}
		if f.Why != "" && !slices.Contains(why, f.Why) {
			why = append(why, f.Why)
		}
		rows = append(rows, []string{mark + rowsOf(f.Rows), kelvin(f.T), plain(f.Exponent, d), probability(f.PValue), significant(f.PredictionError, 2),
			plain(f.Leverage, 2), significant(f.Cook, 2), plain(f.Studentised, 1)})
	}
	set := table(rows, 1, 2, 3, 4, 5, 6, 7)
	lines := append([]string{p.dim(set[0])}, set[1:]...)
	unit := "ln k"
	if a.Prediction != nil {
		unit = a.Prediction.Unit
	}
	legend := "n, p, error: by " + testCurve + ", the curve of the exponent test, without the row; error: of its prediction, in " + or(unit, "the unit of k") + "; leverage, Cook's distance and studentised residual: in " + a.Influence[0].Curve
	if deciding {
		legend += "; •: the verdict hangs on it"
	}
	for _, w := range why {
		legend += "; – for n: " + w
	}
	if r := a.InfluenceRange; r != nil && r.Examined+r.NotExamined > len(a.Influence) {
		legend += fmt.Sprintf("; of %d temperatures and points only outliers and those that decide are listed", r.Examined+r.NotExamined)
	}
	for _, l := range Wrap(legend, p.body()) {
		lines = append(lines, p.dim(l))
	}
	p.section("influence", lines...)
}

// rowsOf names rows in a narrow column.
func rowsOf(rows []int) string {
	const widest = 9
	var s []string
	for _, r := range rows {
		s = append(s, fmt.Sprint(r))
	}
	text := strings.Join(s, ", ")
	if utf8.RuneCountInString(text) > widest && len(rows) > 1 {
		text = fmt.Sprintf("%d rows", len(rows))
	}
	return text
}

// temperatureErrors is the table of what errors of the recorded temperatures do.
func (p *page) temperatureErrors(a *diagnostics.Assessment) {
	if len(a.TemperatureError) == 0 {
		return
	}
	rows := [][]string{{"error δ of T", "dn/dδ/K^-1", "δ/K to the band", "verdict lost", "working"}}
	for _, e := range a.TemperatureError {
		lost := plain(e.Lost, 2)
		if e.Explains {
			lost = "• " + lost
		}
		rows = append(rows, []string{e.Shape, significant(e.Slope, 2), plain(e.ToBand, 2), lost, plain(e.Working, 2)})
	}
	set := table(rows, 1, 2, 3, 4)
	lines := append([]string{p.dim(set[0])}, set[1:]...)
	lost := ""
	if s := a.Verdict.State; s.Curved() {
		lost = " (then " + s.Lost(a.Curvature.Exponent.Value, a.Settings.PrefactorBand) + ")"
	}
	legend := "recorded T = true T + δ·s(T); offset: s = 1; gain: from 0 at the cold end to 1 at the hot end; bow: 1 in the middle, 0 at both ends; to the band, verdict lost: δ in K that takes n to the nearest edge of the prefactor band, and that is enough to take a curved verdict away" + lost + "; working: what a working thermometer may be wrong by; –: none within 50 K and half of the range, or nothing to lose"
	if slices.ContainsFunc(a.TemperatureError, func(e diagnostics.TemperatureError) bool { return e.Explains }) {
		legend += "; •: a working thermometer may be wrong by as much"
	}
	for _, l := range Wrap(legend, p.body()) {
		lines = append(lines, p.dim(l))
	}
	p.section("T errors", lines...)
}
