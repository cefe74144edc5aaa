package report

import (
	"fmt"
	"math"
	"strings"

	"onebarrier/diagnostics"
)

// sources compares the sources of the data, where there are several.
func (p *page) sources(a *diagnostics.Assessment) {
	b := a.BetweenSources
	if b == nil {
		return
	}
	if b.Confounded {
		p.section("sources", Wrap(fmt.Sprintf("%d, taken as one: %s", len(b.Sources), b.Why), p.body())...)
		return
	}
	way := func(x diagnostics.ExponentSources) string {
		if !x.Exponent.Value.Known() {
			return string(x.State)
		}
		e := diagnostics.UnitOfEnergy(a.Settings.EnergyUnit)
		d, change := decimalsOf(x.Exponent), x.EChange.Times(e.PerKJ)
		return fmt.Sprintf("%s, n = %s (%s), ΔE = %s\u00a0%s", x.State, signed(x.Exponent.Value, d), interval(x.Exponent, d),
			signed(change.Value, decimalsOf(change)), e.Name)
	}
	const most = 4 // of more sources the ends are named
	var offsets []string
	low, high := 0, 0
	for i, s := range b.Sources {
		if s.Offset.Value < b.Sources[low].Offset.Value {
			low = i
		}
		if s.Offset.Value > b.Sources[high].Offset.Value {
			high = i
		}
		offsets = append(offsets, offset(s))
	}
	if len(offsets) > most {
		offsets = []string{offset(b.Sources[low]), "…", offset(b.Sources[high])}
	}
	test, found := "test", "none: "+b.WhyUntested
	if b.FTest != nil {
		found = "p = " + probability(b.FTest.PValue)
		if a.Dataset.Limits == 0 { // else by the likelihood ratio
			test = b.TestName(false)
		}
	}
	rows := [][]string{
		{"as one", way(b.Pooled)},
		{"an offset each", way(b.Offset)},
		{"offsets in k", strings.Join(offsets, ", ")},
		{test + " of them", fmt.Sprintf("%s; they make the variance of n %s times as large", found, significant(b.VIF, 2))},
	}
	p.section("sources", p.fit(rows)...)
}

// offset prints the offset of a source from the mean over the sources.
func offset(s diagnostics.SourceOffset) string {
	percent := diagnostics.Real(100 * math.Expm1(float64(s.Offset.Value)))
	text := fmt.Sprintf("%s\u00a0%s\u00a0%%", or(s.Name, "(no name)"), signed(percent, 1))
	if !s.InCurvature {
		text += " (one\u00a0temperature)"
	}
	return text
}

// offsetsIn is the number of offsets that are fitted beside every curve.
func offsetsIn(b *diagnostics.BetweenSources) int {
	n := -1
	for _, s := range b.Sources {
		if s.InCurvature {
			n++
		}
	}
	return max(n, 0)
}
