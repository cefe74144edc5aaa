package report

import (
	"fmt"
	"math"
	"strings"

	"onebarrier/diagnostics"
)

// localEnergies is the table of E between neighbouring temperatures.
func (p *page) localEnergies(a *diagnostics.Assessment) {
	unit := diagnostics.UnitOfEnergy(a.Settings.EnergyUnit)
	head, in := "E", unit.Name
	if unit.Per != "" {
		head = "(E" + unit.Per + ")"
	}
	if strings.Contains(in, "/") {
		in = "(" + in + ")"
	}
	rows := [][]string{{"from", "to", "at T/K", head + "/" + in, "u", percent(diagnostics.Real(a.Settings.Confidence)) + " interval"}}
	var vague []string
	for _, l := range a.LocalEnergies {
		if l.E.StdError.Known() && float64(l.E.StdError) > math.Abs(float64(l.E.Value)) {
			vague = append(vague, fmt.Sprintf("%s and %s\u00a0K", kelvin(l.TLow), kelvin(l.THigh)))
		}
		e := l.E.Times(unit.PerKJ)
		d := decimalsOf(e)
		rows = append(rows, []string{kelvin(l.TLow), kelvin(l.THigh), plain(l.T, 1), plain(e.Value, d), plain(e.StdError, d), interval(e, d)})
	}
	if len(rows) == 1 {
		return
	}
	set := table(rows, 0, 1, 2, 3, 4)
	lines := append([]string{p.dim(set[0])}, set[1:]...)
	lines = append(lines, Wrap("each E is from two rate constants alone, which it shares with its neighbours: one k too high makes one E too high and the next too low", p.body())...)
	if len(vague) > 0 {
		const most = 3
		text := strings.Join(vague[:min(most, len(vague))], ", ")
		if len(vague) > most {
			text += fmt.Sprintf(" and %d more", len(vague)-most)
		}
		lines = append(lines, Wrap("between "+text+" u is larger than E: temperatures so close, or k so scattered, tell nothing of E there", p.body())...)
	}
	p.section("local E", lines...)
}
