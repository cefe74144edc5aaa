package diagnostics

import (
	"cmp"
	"math"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// ToolName is the name of the program in its documents.
const ToolName = "onebarrier"

// assessment puts the document together.
func (a *assessor) assessment() *Assessment {
	s := a.data.sample
	low, high := s.Range()
	doc := &Assessment{
		Schema:   Schema,
		Tool:     Tool{ToolName, a.opt.Version},
		Settings: a.settings(),
		Dataset: DatasetInfo{
			Name: a.set.Name, Files: a.set.Files, SHA256: a.set.SHA256,
			Points: len(a.set.Points), Used: a.data.used() + len(a.data.limits), Temperatures: s.DistinctT(),
			TMin: Real(low), TMax: Real(high), TEff: Real(a.tEff),
			Quantity: Quantity{a.set.Quantity.Symbol, a.set.Quantity.Unit, a.set.Quantity.Known},
			Sources:  sources(a.set.Points),
			Limits:   len(a.data.limits),
		},
		Columns:        []Column{},
		Data:           a.rows(),
		Verdict:        a.verdict,
		Curvature:      a.curvature(),
		BetweenSources: a.between,
		Influence:      append([]Influence{}, a.influence...), InfluenceRange: a.influenceRange, TemperatureError: append([]TemperatureError{}, a.temperature...), RunOrder: a.order,
		Ranking:   a.ranking,
		Bootstrap: a.resampling,
		Sample:    s,
		Fits:      map[string]*fit.Result{},
		ChangeOfE: a.changes,
	}
	for _, c := range a.set.Columns {
		doc.Columns = append(doc.Columns, Column{c.File, c.Heading, c.Role, c.Unit, Real(c.Factor), c.Level})
	}
	for _, f := range a.fits {
		doc.Fits[f.Curve.Info().Name] = f
	}
	doc.Rate = a.set.Quantity
	doc.LocalEnergies, doc.Prediction, doc.ResidualChecks = a.energiesBetween(), a.prediction, a.residuals
	a.publishInto(doc)
	doc.Findings = a.findings
	if doc.Findings == nil {
		doc.Findings = []Finding{}
	}
	for i := range doc.Findings {
		if doc.Findings[i].Rows == nil {
			doc.Findings[i].Rows = []int{}
		}
		if doc.Findings[i].Values == nil {
			doc.Findings[i].Values = map[string]Real{}
		}
	}
	return doc
}

// settings records everything that decided the result.
func (a *assessor) settings() Settings {
	names := make([]string, 0, a.ranked)
	for _, f := range a.fits[:a.ranked] {
		names = append(names, f.Curve.Info().Name)
	}
	scheme := a.opt.Scheme
	if a.resampling != nil {
		scheme = a.resampling.Scheme
	}
	nulls := NullsFull
	if a.opt.SequentialNull {
		nulls = NullsSequential
	}
	return Settings{
		Seed: a.opt.Seed, Resamples: a.opt.Resamples, Scheme: scheme,
		Confidence: a.opt.Confidence, ErrorModel: a.model, ErrorModelWhy: a.modelWhy,
		Replicates: a.opt.Replicates, Sources: cmp.Or(a.opt.Sources, SourcesOffsets), Criterion: a.opt.Criterion, PrefactorBand: a.opt.PrefactorBand,
		ToleranceKJ: Real(a.rule.ToleranceKJ), Tolerance: cmp.Or(a.opt.Tolerance, defaultTolerance), Models: names,
		ThermometerError:     cmp.Or(a.opt.ThermometerError, defaultThermometerError),
		ReferenceTemperature: a.referenceTemperature(),
		EnergyUnit:           a.opt.EnergyUnit, PublishStyle: a.publishStyle(),
		Assumed: orEmpty(a.set.Assumed), Selection: orEmpty(a.opt.Selection),
		Intervals: orEmpty(a.opt.Intervals), NullDraws: nulls,
	}
}

func orEmpty(s []string) []string { return append([]string{}, s...) }

// referenceTemperature is where forms are stated: what was asked for, or 298.15 K
// where that was measured, else T_eff to the nearest kelvin.
func (a *assessor) referenceTemperature() float64 {
	const standard = 298.15
	if a.opt.ReferenceTemperature > 0 {
		return a.opt.ReferenceTemperature
	}
	if low, high := a.data.sample.Range(); low <= standard && standard <= high {
		return standard
	}
	return math.Round(a.tEff)
}

// rows lists every row of the input. Residuals are from the straight line: in
// ln k, or in k where the error model is InK.
func (a *assessor) rows() []Datum {
	type place struct {
		file string
		row  int
	}
	nan := math.NaN()
	residual := map[place][]float64{} // repeats side by side have one row, in their order
	single := a.data.single
	line := make([]float64, single.Len())
	a.straight.Curve.LnK(a.straight.TRef, single.T, a.straight.P, line, nil)
	for i, p := range a.data.points {
		r := single.Y[i] - line[i]
		if single.Model.InK() {
			r = single.K[i] - math.Exp(line[i])
		}
		at := place{p.File, p.Row}
		residual[at] = append(residual[at], r)
	}
	out := make([]Datum, 0, len(a.set.Points))
	for _, p := range a.set.Points {
		d := Datum{File: p.File, Row: p.Row, T: Real(p.T), K: Real(p.K), UK: Real(nan), Limit: p.Limit,
			Source: p.Source, Used: p.Used, WhyNot: p.WhyNot, Residual: Real(nan)}
		if p.UK > 0 {
			d.UK = Real(p.UK)
		}
		if a.data.entersAsLimit(p) {
			d.Used, d.WhyNot = true, ""
		}
		at := place{p.File, p.Row}
		if r := residual[at]; p.Used && len(r) > 0 {
			d.Residual, residual[at] = Real(r[0]), r[1:]
		}
		out = append(out, d)
	}
	return out
}

// curvature is the test's place in the document.
func (a *assessor) curvature() Curvature {
	t := a.exponent
	atMin, atMax := a.localEnergies()
	return Curvature{
		Basis:    a.data.basis,
		Exponent: NewEstimate(t.Exponent), EChange: NewEstimate(t.Change),
		PValue: Real(t.PValue), PBand: Real(t.PBand), PScaleFree: Real(t.PScaleFree),
		Detectable: NewEstimate(t.Detectable), ToleranceKJ: Real(a.rule.ToleranceKJ),
		Nu: t.Nu, Pointwise: a.pointwise, SecondBarrier: a.secondRun,
		ELocTMin: atMin, ELocTMax: atMax,
	}
}

// localEnergies are E_loc at both ends of the range by power-prefactor, in kJ/mol.
func (a *assessor) localEnergies() (atMin, atMax Estimate) {
	low, high := a.data.sample.Range()
	return NewEstimate(LocalEnergy(a.power, low, a.opt.Confidence)), NewEstimate(LocalEnergy(a.power, high, a.opt.Confidence))
}

// sources lists the sources of the used points in order of appearance.
func sources(points []dataset.Point) []string {
	out, seen := []string{}, map[string]bool{}
	for _, p := range points {
		if p.Used && p.Source != "" && !seen[p.Source] {
			seen[p.Source] = true
			out = append(out, p.Source)
		}
	}
	return out
}
