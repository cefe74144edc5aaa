package diagnostics

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
)

// limitLevel is the probability of a limit below which it contradicts the points.
const limitLevel = 0.01

// readLimits finds the limits of a set that enter.
func (p *prepared) readLimits(set *dataset.Set) {
	for _, pt := range set.LimitPoints() {
		if p.whyNoLimit(set, pt) == "" {
			p.limits = append(p.limits, pt)
		}
	}
	slices.SortStableFunc(p.limits, func(a, b dataset.Point) int {
		return cmp.Or(cmp.Compare(a.T, b.T), cmp.Compare(a.Row, b.Row))
	})
	for _, pt := range p.limits {
		p.bounds = append(p.bounds, fit.Limit{T: pt.T, K: pt.K, Below: pt.Limit == "<", V: p.limitVariance(pt)})
		if p.sources != nil {
			p.bounded = append(p.bounded, slices.Index(p.sources.names, pt.Source))
		}
	}
}

// whyNoLimit says why a limit of the set cannot enter, "" where it does. Where sources
// are told apart, a limit of one that measured nothing cannot: an offset of that source
// would be bounded from one side only, and the likelihood is largest where it makes the
// limit say nothing.
func (p *prepared) whyNoLimit(set *dataset.Set, pt dataset.Point) string {
	if !(pt.K > 0) && !p.single.Model.InK() {
		return "a limit of k that is not positive says nothing of ln k"
	}
	names := map[string]bool{}
	measured := false
	for _, q := range set.Points {
		if !q.Used && !q.IsLimit() {
			continue
		}
		if q.Source != "" {
			names[q.Source] = true
		}
		measured = measured || q.Used && q.Source == pt.Source
	}
	switch {
	case measured || len(names) < 2:
		return ""
	case pt.Source == "":
		return "it names no source, and so has no offset from the others that the data determine"
	}
	return fmt.Sprintf("%s has no measured k, so that its offset from the other sources is bounded from one side only", pt.Source)
}

// addLimits takes the limits into the samples, each as an entry of its own: they are
// not averaged with what was measured at the same temperature.
func (p *prepared) addLimits() error {
	if len(p.bounds) == 0 {
		return nil
	}
	var err error
	if p.single, err = p.single.WithLimits(p.bounds); err == nil && p.means != nil {
		p.means, err = p.means.WithLimits(p.bounds)
	}
	return err
}

// limitVariance is the variance of what would have been measured in place of a limit. A
// limit without an uncertainty, where uncertainties are stated, takes that of the
// measured point nearest in temperature: relative where errors are in ln k.
func (p *prepared) limitVariance(pt dataset.Point) float64 {
	model := p.single.Model
	if model == fit.Relative || model == fit.Absolute {
		return 1
	}
	nearest := 0
	for i, q := range p.points {
		if math.Abs(q.T-pt.T) < math.Abs(p.points[nearest].T-pt.T) {
			nearest = i
		}
	}
	v := p.single.V[nearest] // what u(T) adds there included
	if pt.UK > 0 {
		v = variance(pt, model)
	}
	if !(v > 0) || math.IsInf(v, 0) {
		v = p.single.V[nearest]
	}
	return v
}

// entersAsLimit reports whether the point is one of the limits of the samples.
func (p *prepared) entersAsLimit(pt dataset.Point) bool {
	return slices.ContainsFunc(p.limits, func(l dataset.Point) bool {
		return l.File == pt.File && l.Row == pt.Row && l.Column == pt.Column
	})
}

// places are the indices in the set of the limits, and of those that do not enter.
func (a *assessor) limitPlaces() (in, out []int) {
	for i, p := range a.set.Points {
		switch {
		case a.data.entersAsLimit(p):
			in = append(in, i)
		case p.IsLimit():
			out = append(out, i)
		}
	}
	return in, out
}

// limitFindings says how limits were taken.
func (a *assessor) limitFindings() {
	in, out := a.limitPlaces()
	rows := func(at []int) (rows []int) {
		for _, i := range at {
			rows = append(rows, a.set.Points[i].Row)
		}
		return rows
	}
	for len(out) > 0 { // one finding for each reason
		why := a.data.whyNoLimit(a.set, a.set.Points[out[0]])
		var these, others []int
		for _, i := range out {
			if a.data.whyNoLimit(a.set, a.set.Points[i]) == why {
				these = append(these, i)
			} else {
				others = append(others, i)
			}
		}
		f := newFinding("limits-left-out", fmt.Sprintf("%s: %s left out; %s", a.set.Places(these), count(len(these), "limit"), why), rows(these), nil)
		if p := a.set.Points[out[0]]; p.K > 0 {
			f.Cure = "name the source of a limit as that of the points that share its factor"
			if p.Source != "" {
				f.Cure = "measure k there as well, or name the source as that of the points that share its factor"
			}
		}
		a.findings = append(a.findings, f)
		out = others
	}
	if len(in) == 0 {
		return
	}
	approximate := "the 5 % of the verdict, and every interval, is then approximate"
	if len(a.power.Warnings) > 0 && a.power.Nu < 1 {
		approximate = "every interval is then approximate. The exponent test takes none of them: limits do not stand in for measured temperatures"
	}
	a.find("limits-approximate", fmt.Sprintf("%s: %s as the probability of its side; %s", a.set.Places(in), enter(len(in)), approximate), rows(in),
		map[string]Real{"limits": Real(len(in))})
	var against []int // places of limits that the measured points contradict
	least, worst := math.Inf(1), dataset.Point{}
	for i, pt := range a.data.limits {
		p, ok := a.limitProbability(a.data.sample.Limits[i])
		if !ok || !(p < limitLevel) {
			continue
		}
		at := slices.IndexFunc(a.set.Points, func(q dataset.Point) bool { return q.File == pt.File && q.Row == pt.Row && q.Column == pt.Column })
		against = append(against, at)
		if p < least {
			least, worst = p, pt
		}
	}
	if len(against) == 0 {
		return
	}
	what := fmt.Sprintf("k %s %.4g at %.6g K has", worst.Limit, worst.K, worst.T)
	if len(against) > 1 { // one finding: it is mostly one fault
		what = fmt.Sprintf("%d limits; the least likely, k %s %.4g at %.6g K, has", len(against), worst.Limit, worst.K, worst.T)
	}
	a.find("limit-contradicted", fmt.Sprintf("%s: %s a probability of %.1g by the measured points", a.set.Places(against), what, least), rows(against),
		map[string]Real{"limits": Real(len(against)), "t_k": Real(worst.T), "limit": Real(worst.K), "probability": Real(least)})
}

// enter: 1 limit enters, 2 limits enter.
func enter(n int) string {
	if n == 1 {
		return "1 limit enters"
	}
	return fmt.Sprintf("%d limits enter, each", n)
}

// limitProbability is that of a new measurement on the side of a limit, by Student's t
// (normal where σ is known) about the power-prefactor fit of the measured points, or
// the straight one where that has no degree of freedom: the joint fit would already
// lean to the limit. Beside offsets both are of the source of the limit. ok is false
// where neither has.
func (a *assessor) limitProbability(l fit.Limit) (p float64, ok bool) {
	for _, r := range []*fit.Result{a.power.Measured(), a.straight.Measured()} {
		known := r.Model.KnownSigma()
		if r.Status != fit.Converged || r.Cov == nil || !known && r.Nu < 1 || !(r.Sigma > 0) {
			continue
		}
		jac, f := make([]float64, r.Params()), []float64{0}
		r.Curve.LnK(r.TRef, []float64{l.T}, r.P, f, jac)
		cov := r.Cov
		if r.Spent > 0 {
			if cov = r.JointCov; cov == nil {
				continue
			}
			jac = append(jac, l.Beside...)
			f[0] += floats.Dot(l.Beside, r.Beside)
		}
		var variance float64
		for i, x := range jac {
			for j, y := range jac {
				variance += x * cov[i*len(jac)+j] * y
			}
		}
		se, d := math.Sqrt(math.Max(0, variance)), math.Log(l.K)-f[0]
		if r.Model.InK() {
			k := math.Exp(f[0])
			se, d = se*k, l.K-k
		}
		if !l.Below {
			d = -d
		}
		z := d / math.Sqrt(se*se+r.Sigma*r.Sigma*l.V)
		tail := pNormal(z) / 2
		if !known {
			tail = pStudent(z, float64(r.Nu)) / 2
		}
		if z > 0 {
			tail = 1 - tail
		}
		return tail, true
	}
	return math.NaN(), false
}
