package diagnostics

import (
	"fmt"
	"math"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// otherWay is the error model that assumes of k what another assumes of ln k, and the
// reverse; none for scaled, since a factor common to stated u(k) has no such pair.
var otherWay = map[fit.ErrorModel]fit.ErrorModel{
	fit.Relative: fit.Absolute, fit.Absolute: fit.Relative,
	fit.Stated: fit.StatedAbsolute, fit.StatedAbsolute: fit.Stated,
}

// under is the sample of the verdict under another error model: the same points, means,
// limits and offsets.
func (p *prepared) under(model fit.ErrorModel, replicates string) (*fit.Sample, error) {
	q := &prepared{points: p.points, source: p.source, limits: p.limits, bounded: p.bounded}
	n := len(p.points)
	t, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, pt := range p.points {
		t[i], k[i], v[i] = pt.T, pt.K, variance(pt, model)
	}
	var err error
	if q.single, err = fit.NewSample(model, t, k, v); err != nil {
		return nil, err
	}
	if err := q.addTemperatureVariance(); err != nil {
		return nil, err
	}
	for _, pt := range q.limits {
		q.bounds = append(q.bounds, fit.Limit{T: pt.T, K: pt.K, Below: pt.Limit == "<", V: q.limitVariance(pt)})
	}
	if err := q.choose(replicates); err != nil {
		return nil, err
	}
	if p.sources != nil && p.sources.confounded == "" {
		all := q.withBounded(q.entrySources())
		q.sample = q.sample.WithOffsets(p.sources.offsetsOf(all), contrasts(all))
	}
	return q.sample, nil
}

// errorModels compares errors of ln k with errors of k by AIC of the same curve under
// both, r being its fit under the model of the verdict: both likelihoods are densities of
// k. gain is AIC with errors of ln k less that with errors of k. curve is that of r or,
// where it cannot be fitted both ways since it bends one way only, power-prefactor. why
// says why there is no gain. A fit in k from nothing is dear, and is made where exact asks
// for it or no other answer is found.
func (a *assessor) errorModels(r *fit.Result, exact bool) (gain float64, curve, why string) {
	s := a.data.sample
	nan := math.NaN()
	model, ok := otherWay[s.Model]
	switch {
	case !ok:
		return nan, "", "the factor common to the stated u(k) has no counterpart in k"
	case s.Len() > FullyResampled:
		return nan, "", fmt.Sprintf("not compared for more than %d entries", FullyResampled)
	}
	if !model.InK() {
		for _, p := range a.data.points {
			if !(p.K > 0) {
				return nan, "", "a k that is not positive has no logarithm"
			}
		}
		for _, l := range s.Limits {
			if !(l.K > 0) {
				return nan, "", "a limit of k that is not positive has no logarithm"
			}
		}
	}
	for _, p := range a.data.points {
		if model.KnownSigma() && !(p.UK > 0) {
			return nan, "", "not every point has a stated u(k)"
		}
	}
	other, err := a.data.under(model, a.opt.Replicates)
	if err != nil {
		return nan, "", "the data cannot be used under " + string(model)
	}
	tries := []*fit.Result{r}
	if r != a.power {
		tries = append(tries, a.power)
	}
	for _, r := range tries {
		f := nearFit(other, r)
		if f == nil || exact {
			a.dearFits++
			f = fit.Fit(other, r.Curve)
		}
		if f.Status != fit.Converged || r.Status != fit.Converged {
			continue
		}
		if gain = r.AIC() - f.AIC(); math.IsNaN(gain) || math.IsInf(gain, 0) {
			continue
		}
		if s.Model.InK() {
			gain = -gain
		}
		return gain, r.Curve.Info().Name, ""
	}
	return nan, "", "no curve could be fitted under both error models"
}

// nearFit fits power-prefactor to a sample with errors in k from r, its fit to the same
// data in ln k, as far as the likelihood; nil for other curves, with limits, and where the
// search does not end well.
func nearFit(s *fit.Sample, r *fit.Result) *fit.Result {
	if !s.Model.InK() || len(s.Limits) > 0 || r.Status != fit.Converged || r.Curve.Info().Name != (models.PowerPrefactor{}).Info().Name {
		return nil
	}
	f := newNearPower(s, r.TRef, r.P, r.Beside)
	if f == nil {
		return nil
	}
	rss, ok := f.search(make([]float64, f.p), false)
	if !ok {
		return nil
	}
	if !s.Model.KnownSigma() {
		rss *= f.unit * f.unit
	}
	return &fit.Result{Status: fit.Converged, Curve: r.Curve, Model: s.Model, N: s.Len(), Spent: s.Spent(),
		RSS: rss, LogLik: fit.LogLikelihood(s, rss)}
}
